"""What one increment does wrong, term by term: where on a path a rule parts from the integral, and at which relaxation time."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.path import segment_blocks
from drivers.studies.runner import OWN, Rule
from drivers.studies.trial import Counts, Trials
from matlib.arrays import FloatArray
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import find_recursion
from matlib.shift import find_shift_rule
from matlib.tensors import DEVIATORIC

__all__ = ["Defect", "largest_defect"]

PARTS = 8
"""Parts of an increment over which the integral itself is summed."""

LARGEST_R = 1e300


@dataclass(frozen=True, slots=True, kw_only=True)
class Defect:
    """The increment of a segment that departs most from the integral, for strains that run straight.

    Parameters
    ----------
    temperature : float
        In the middle of the increment [K].
    decades : float
        Change of log10 a_T over it.
    ratio : float
        Its reduced time over `relaxation_time`.
    relaxation_time : float
        Of the term that is most wrong [s at T_ref].
    sum : float
        Of all defects of the segment, as a fraction of the peak stress; what is forgotten again is in it.
    """

    temperature: float
    decades: float
    ratio: float
    relaxation_time: float
    sum: float


@dataclass(frozen=True, slots=True)
class _Increments:
    """All increments of a run, in order."""

    duration: FloatArray
    T_start: FloatArray
    T_end: FloatArray
    inside: np.ndarray


def largest_defect(trials: Trials, material: Material, rule: Rule, counts: Counts, segment: int) -> Defect:
    """Find the worst increment of one segment.

    Parameters
    ----------
    trials : Trials
    material : Material
    rule : Rule
        One of ours; with `OWN`, what relaxes within an increment counts as its defect.
    counts : tuple of int
        Increments of each distinct segment.
    segment : int
        Number among the distinct segments.

    Returns
    -------
    Defect
    """
    history = trials.reference(counts).history
    steps = _increments(trials, counts, segment)
    shear, bulk = material.shear, material.bulk
    deviators = history.strain @ DEVIATORIC.T
    component = int(np.abs(deviators).max(axis=0).argmax())
    thermal = material.expansion * (history.temperature - trials.path.start_temperature)
    inputs = ((shear, 2.0 * deviators[:, component]), (bulk, history.strain[:, :3].sum(axis=1) - 3.0 * thermal))
    peak = float(np.abs(history.stress).max()) or 1.0
    worst, total = (0.0, int(np.flatnonzero(steps.inside)[0]), math.inf), 0.0
    for series, u in inputs:
        if series.times.size:
            defects = _defects(material, rule, steps, series, u)
            row, term = (int(i) for i in np.unravel_index(int(defects.argmax()), defects.shape))
            worst = max(worst, (float(defects[row, term]), row, float(series.times[term])), key=lambda w: w[0])
            total += float(defects.sum())
    return _described(material, rule, steps, *worst[1:], total / peak)


def _increments(trials: Trials, counts: Counts, wanted: int) -> _Increments:
    T, parts = trials.path.start_temperature, []
    for index, _, segment in trials.path.with_increments(counts).unrolled():
        for block in segment_blocks(segment, 0.0, T, np.zeros(6)):
            inside = np.full(block.duration.size, index == wanted)
            parts.append((block.duration, block.temperature[:-1], block.temperature[1:], inside))
            T = float(block.temperature[-1])
    return _Increments(*(np.concatenate(column) for column in zip(*parts, strict=True)))


def _defects(material: Material, rule: Rule, steps: _Increments, series: PronySeries, u: FloatArray) -> FloatArray:
    """Stress that each increment of the segment gets wrong in each term [Pa], zero elsewhere, shape (n, terms)."""
    exact = _ratios(_clock(material, OWN, steps), series.times)
    decay, du = np.exp(-exact), np.diff(u)[:, np.newaxis]
    kept = _carried(decay, _mean_decay(exact) * du)
    r = exact if rule == OWN else _ratios(_clock(material, rule, steps), series.times)
    defects = np.zeros_like(r)
    rows = np.flatnonzero(steps.inside)
    for some in np.array_split(rows, 1 + rows.size // 4096):
        gain = _gain(material, steps, some, series.times)
        if rule == OWN:
            wrong = (1.0 - decay[some]) * kept[some] + (1.0 - gain) * du[some]
        else:
            recursion = find_recursion(rule.recursion)
            wrong = (recursion.decay(r[some]) - decay[some]) * kept[some] + (recursion.gain(r[some]) - gain) * du[some]
        defects[some] = np.abs(wrong) * series.moduli
    return defects


def _clock(material: Material, rule: Rule, steps: _Increments) -> FloatArray:
    """Reduced time of each increment, the exact one for a rule that is not ours."""
    name = "integrated" if rule == OWN else rule.shift_rule
    return find_shift_rule(name)(material.shift, steps.duration, steps.T_start, steps.T_end)


def _ratios(dxi: FloatArray, times: FloatArray) -> FloatArray:
    with np.errstate(over="ignore"):
        return np.minimum(dxi[:, np.newaxis] / times, LARGEST_R)


def _mean_decay(r: FloatArray) -> FloatArray:
    safe = np.where(r > 0.0, r, 1.0)
    return np.where(r > 0.0, -np.expm1(-safe) / safe, 1.0)


def _carried(decay: FloatArray, change: FloatArray) -> FloatArray:
    """What each term holds at the start of each increment, per modulus."""
    held, state = np.empty_like(decay), np.zeros(decay.shape[1])
    for k in range(len(decay)):
        held[k] = state
        state = decay[k] * state + change[k]
    return held


def _gain(material: Material, steps: _Increments, rows: np.ndarray, times: FloatArray) -> FloatArray:
    """The integral over an increment of straight strain and temperature, summed over parts; shape (rows, terms)."""
    edges = np.linspace(0.0, 1.0, PARTS + 1)
    T = steps.T_start[rows, np.newaxis] + edges * (steps.T_end - steps.T_start)[rows, np.newaxis]
    dxi = find_shift_rule("integrated")(material.shift, steps.duration[rows, np.newaxis] / PARTS, T[:, :-1], T[:, 1:])
    after = np.zeros(rows.size)
    gain = np.zeros((rows.size, times.size))
    for part in reversed(range(PARTS)):
        gain += np.exp(-_ratios(after, times)) * _mean_decay(_ratios(dxi[:, part], times)) / PARTS
        after = after + dxi[:, part]
    return gain


def _described(material: Material, rule: Rule, steps: _Increments, row: int, tau: float, total: float) -> Defect:
    law = material.shift
    ends = steps.T_start[row], steps.T_end[row]
    ln_a = law.ln_shift(np.array(ends))
    dxi = float(_clock(material, rule, steps)[row])
    return Defect(
        temperature=float(np.mean(ends)),
        decades=abs(float(ln_a[1] - ln_a[0])) / math.log(10.0),
        ratio=dxi / tau,
        relaxation_time=tau,
        sum=total,
    )
