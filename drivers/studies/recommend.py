"""Increments for each segment: a dwell and a quench need different ones."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.path import Path, Segment, fractions
from drivers.studies.ladder import total_increments
from drivers.studies.trial import Counts, Rule, Trials

__all__ = ["Advice", "Recommendation", "recommend"]

LARGEST_RUN = 400_000
"""Increments of a recommended run at most."""

AIM = 0.7
"""Share of the tolerance that a recommendation aims at: small enough, and not wasteful."""

WASTEFUL = 0.4
PROBE = 16
FINE = 4
ROUNDS = 12


@dataclass(frozen=True, slots=True, kw_only=True)
class Advice:
    """What one segment needs.

    Parameters
    ----------
    segment : str
        Its label.
    increments : int
        Of each straight piece.
    largest_increment : float
        Longest of them [s].
    largest_temperature_change : float
        Over one increment [K].
    """

    segment: str
    increments: int
    largest_increment: float
    largest_temperature_change: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Recommendation:
    """Increments of every distinct segment, and the error that a run with them has."""

    advice: tuple[Advice, ...]
    counts: Counts
    increments: int
    relative_error: float


def recommend(trials: Trials, rule: Rule, tolerance: float) -> Recommendation | None:
    """Find increments of each segment whose run meets the tolerance without waste.

    Parameters
    ----------
    trials : Trials
    rule : Rule
    tolerance : float

    Returns
    -------
    Recommendation or None
        Verified by a run against the reference solution at its own increment ends; None where that takes more than
        `LARGEST_RUN` increments.

    Notes
    -----
    Coarsening one segment at a time shows its share of the error, ``C n**-p``. The least increments whose shares sum to the
    tolerance have ``n`` in proportion to ``(C / rounds)**(1/(p+1))``; the size follows from the tolerance, and is corrected by what
    runs show.
    """
    order = trials.runner.order(rule)
    shares = _shares(trials, rule)
    rounds = np.bincount([index for index, _, _ in trials.path.unrolled()], minlength=len(shares)).astype(np.float64)
    weights = (np.maximum(shares, 1e-6 * max(shares.max(), 1e-300)) * PROBE**order / rounds) ** (1.0 / (order + 1.0))
    size = (float((shares * PROBE**order / weights**order).sum()) / (AIM * tolerance)) ** (1.0 / order)

    def counts_of(scale: float) -> Counts:
        return tuple(max(1, math.ceil(scale * w)) for w in weights)

    best: tuple[float, Counts] | None = None
    tried: dict[Counts, float] = {}
    low, high = 0.0, math.inf
    for _ in range(ROUNDS):
        counts = counts_of(size)
        if total_increments(trials.path, counts) > LARGEST_RUN:
            break
        if counts not in tried:
            tried[counts] = trials.difference(rule, counts).relative
        error = tried[counts]
        if error <= tolerance:
            high = min(high, size)
            if best is None or total_increments(trials.path, counts) < total_increments(trials.path, best[1]):
                best = (error, counts)
            if error >= WASTEFUL * tolerance or all(n == 1 for n in counts):
                break
        else:
            low = max(low, size)
        wanted = size * (max(error, 1e-3 * tolerance) / (AIM * tolerance)) ** (1.0 / order)
        if not low < wanted < high:
            wanted = math.sqrt(low * high) if low > 0.0 and high < math.inf else wanted
        if high < math.inf and low > 0.0 and counts_of(low) == counts_of(high):
            break
        size = wanted
    if best is None:
        return None
    error, counts = _trimmed(trials, rule, tolerance, *best)
    advice = tuple(_advice(trials.path, segment, n) for segment, n in zip(trials.path.segments, counts, strict=True))
    return Recommendation(
        advice=advice, counts=counts, increments=total_increments(trials.path, counts), relative_error=error
    )


def _shares(trials: Trials, rule: Rule) -> np.ndarray:
    """Error of each segment at `PROBE` increments, with all others `FINE` times finer."""
    fine = tuple(FINE * PROBE for _ in trials.path.segments)
    at = tuple(PROBE for _ in trials.path.segments)
    rest = trials.difference(rule, fine, at=at).relative
    shares = []
    for k, segment in enumerate(trials.path.segments):
        if not np.any(segment.durations > 0.0):
            shares.append(0.0)
            continue
        counts = tuple(PROBE if j == k else n for j, n in enumerate(fine))
        coarse = trials.difference(rule, counts, at=at).relative
        shares.append(max(coarse - rest, rest / (16.0 * len(fine))))
    return np.array(shares)


def _trimmed(trials: Trials, rule: Rule, tolerance: float, error: float, counts: Counts) -> tuple[float, Counts]:
    """Take increments off single segments where a whole number too many was given."""
    if error >= WASTEFUL * tolerance:
        return error, counts
    for k in sorted(range(len(counts)), key=lambda k: -counts[k]):
        while counts[k] > 1:
            fewer = tuple(max(1, (3 * n) // 4) if j == k else n for j, n in enumerate(counts))
            less = trials.difference(rule, fewer).relative
            if less > tolerance:
                break
            error, counts = less, fewer
            if error >= WASTEFUL * tolerance:
                return error, counts
    return error, counts


def _advice(path: Path, segment: Segment, count: int) -> Advice:
    longest = float(segment.durations.max())
    share = float(fractions(count, segment.spacing, count - 1, count)[1][0]) if longest > 0.0 else 1.0
    return Advice(
        segment=segment.label,
        increments=count,
        largest_increment=longest * share,
        largest_temperature_change=_temperature_span(path, segment) * (share if longest > 0.0 else 1.0),
    )


def _temperature_span(path: Path, wanted: Segment) -> float:
    """Largest temperature change over a piece of a segment, wherever it runs [K]."""
    T, span = path.start_temperature, 0.0
    for _, _, segment in path.unrolled():
        ends = segment.temperatures
        if ends is None:
            continue
        if segment is wanted:
            span = max(span, float(np.abs(np.diff(ends, prepend=T)).max()))
        T = float(ends[-1])
    return span
