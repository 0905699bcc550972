"""Which segment the error of a run comes from, and why."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.difference import Difference
from drivers.path import segment_blocks
from drivers.studies.trial import OWN, Counts, Rule, Trials
from matlib.arrays import FloatArray
from matlib.material import Material
from matlib.recursion import find_recursion

__all__ = ["Blame", "find_blame"]

FINER = 8
CLOCK_SHARE = 0.5
"""Where the exact clock takes away at least this share of the error, the shift rule is to blame."""

STILL_CARRIES = 0.01
"""A term carries stress while its share of the largest relaxing stress of the segment is above this."""

LARGE_R = 3.0

EXACT = Rule(shift_rule="integrated", recursion="exponential")
"""Its clock tells the size of an increment."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Blame:
    """Where the error arises and why.

    Parameters
    ----------
    segment : str
        Label of the segment whose own increments make the largest part of the error.
    share : float
        Error that this segment alone makes, as a fraction of the peak.
    cause : {"clock", "recursion", "its own"}
        Whether the reduced time of increments is off, or what is done with it; a routine that is not ours does not tell.
    decades : float or None
        Largest change of log10 a_T over one of its increments; None where no material is known.
    ratio : float or None
        Largest reduced time of an increment over the shortest relaxation time that still carries stress; None likewise.
    sentence : str
        All of it in words.
    """

    segment: str
    share: float
    cause: str
    decades: float | None
    ratio: float | None
    sentence: str


def find_blame(trials: Trials, rule: Rule, counts: Counts, own: Difference) -> Blame | None:
    """Refine every segment but one, one after the other; the one that keeps most of the error is to blame.

    Parameters
    ----------
    trials : Trials
    rule : Rule
    counts : tuple of int
        The path's own increments.
    own : Difference
        Their error.

    Returns
    -------
    Blame or None
        None where the error is within the reference solution's bound.
    """
    if own.relative <= 2.0 * trials.reference(counts).relative_bound:
        return None
    segments = trials.path.segments
    errors = []
    for k in range(len(segments)):
        mixed = tuple(n if j == k else FINER * n for j, n in enumerate(counts))
        moving = bool(np.any(segments[k].durations > 0.0))
        errors.append(trials.difference(rule, mixed, at=counts).relative if moving else 0.0)
    worst = int(np.argmax(errors))
    label, share, material = segments[worst].label, errors[worst], trials.runner.material
    if material is None:
        sentence = f"Segment {label!r} makes most of the error."
        return Blame(segment=label, share=share, cause="its own", decades=None, ratio=None, sentence=sentence)
    cause = "its own" if rule == OWN else _cause(trials, rule, counts, own)
    decades, ratio, tau = _sizes(trials, EXACT if rule == OWN else rule, material, counts, worst)
    sentence = _sentence(label, rule, cause, decades, ratio, tau)
    return Blame(segment=label, share=share, cause=cause, decades=decades, ratio=ratio, sentence=sentence)


def _cause(trials: Trials, rule: Rule, counts: Counts, own: Difference) -> str:
    exact = Rule(shift_rule=EXACT.shift_rule, recursion=rule.recursion)
    with_clock = own.relative if rule == exact else trials.difference(exact, counts).relative
    return "clock" if with_clock < (1.0 - CLOCK_SHARE) * own.relative else "recursion"


def _sentence(label: str, rule: Rule, cause: str, decades: float, ratio: float, tau: float) -> str:
    if cause == "clock":
        return (
            f"Segment {label!r} makes most of the error: a_T changes by up to {decades:.2g} decades over one of its increments, more "
            f"than shift rule {rule.shift_rule} can follow."
        )
    limit = ""
    if cause == "recursion" and ratio >= LARGE_R and not find_recursion(rule.recursion).right_limit:
        limit = f"; {rule.recursion} fails there: {find_recursion(rule.recursion).large_r}"
    return (
        f"Segment {label!r} makes most of the error: an increment spans up to {ratio:.2g} times the shortest relaxation time that still "
        f"carries stress ({tau:.2g} s at T_ref), and a_T changes by up to {decades:.2g} decades over one{limit}."
    )


def _sizes(trials: Trials, rule: Rule, material: Material, counts: Counts, worst: int) -> tuple[float, float, float]:
    """Largest change of log10 a_T over an increment of a segment; largest dxi/tau and that tau, of terms that carry stress."""
    routine = rule.routine(material)
    path = trials.path.with_increments(counts)
    T, decades, ratio, which = path.start_temperature, 0.0, 0.0, 0.0
    for index, _, segment in path.unrolled():
        for block in segment_blocks(segment, 0.0, T, np.zeros(6)):
            T_ends = block.temperature
            if index == worst:
                ln_a = material.shift.ln_shift(T_ends)
                decades = max(decades, float(np.abs(np.diff(ln_a)).max()) / math.log(10.0))
                dxi = routine.reduced_time(block.duration, T_ends[:-1], T_ends[1:])
                r, tau = _largest_ratio(dxi, block.duration, material.shear.times, material.shear.moduli)
                if r > ratio:
                    ratio, which = r, tau
            T = float(T_ends[-1])
    return decades, ratio, which


def _largest_ratio(dxi: FloatArray, duration: FloatArray, times: FloatArray, moduli: FloatArray) -> tuple[float, float]:
    """Largest dxi/tau over terms and increments where the term carries stress under a steady rate, and its tau."""
    if times.size == 0 or not np.any(duration > 0.0):
        return 0.0, 0.0
    r = dxi[:, np.newaxis] / times
    safe = np.where(r > 0.0, r, 1.0)
    carried = moduli * np.where(r > 0.0, -np.expm1(-safe) / safe, 1.0)  # stress that a steady rate leaves in the term
    carries = carried >= STILL_CARRIES * carried.max(axis=1, keepdims=True)
    masked = np.where(carries, r, 0.0)
    row, term = np.unravel_index(int(masked.argmax()), masked.shape)
    return float(masked[row, term]), float(times[term])
