"""How the increments of a run should be shared out among its segments."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from drivers.difference import shared_rows
from drivers.path import Path
from drivers.point import ResponseError
from drivers.studies.ladder import judging_count, pieces_of
from drivers.studies.runner import Rule
from drivers.studies.trial import Counts, Trials
from matlib.arrays import FloatArray

__all__ = ["added", "moved", "pieces_by_segment", "weights_of"]

AIM = 0.8
"""Share of the tolerance to aim at."""

INERT = 1e-3
"""A segment that contributes no more than this part of the tolerance needs a single increment."""

PROBE, FINER = 16, 4
PROBED_RUN = 60_000
"""Increments of a run that shares are found with, at most."""


def weights_of(
    trials: Trials, rule: Rule, tolerance: float, shares: Callable[[Trials, Rule, int, float], FloatArray]
) -> tuple[FloatArray, float, float]:
    """Increments of the segments in proportion, the largest 1, the factor that would meet the tolerance, and the order.

    Parameters
    ----------
    trials : Trials
    rule : Rule
    tolerance : float
    shares : callable
        `moved` or `added`: what each segment contributes to the error, of a rule with a few increments; called with that number
        and the contribution up to which a segment needs one increment only, whose weight is zero.
    """
    order = trials.runner.order(rule)
    pieces = pieces_by_segment(trials.path)
    probe = PROBE
    while probe > 1 and pieces.sum() * probe * FINER > PROBED_RUN:
        probe //= 2
    try:
        constants = shares(trials, rule, probe, INERT * tolerance) * probe**order
    except ResponseError:
        constants = (pieces > 0.0).astype(np.float64)
    if not constants.any():
        return constants, 1.0, order
    weights = (constants / np.maximum(pieces, 1.0)) ** (1.0 / (order + 1.0))
    weights /= weights.max()
    some = weights > 0.0
    size = float((constants[some] / weights[some] ** order).sum() / (AIM * tolerance)) ** (1.0 / order)
    return weights, size, order


def pieces_by_segment(path: Path) -> FloatArray:
    """Straight pieces of each distinct segment that take time, cycles counted."""
    pieces = np.zeros(len(path.segments))
    for index, _, segment in path.unrolled():
        pieces[index] += np.count_nonzero(segment.durations)
    return pieces


def moved(trials: Trials, rule: Rule, probe: int, inert: float) -> FloatArray:
    """How far a run moves when one segment has few increments and all others many, by segment.

    A part of the error that is left with many is laid on every segment: an error may hardly move yet. Where even a single increment
    moves the run by no more than `inert`, the share is zero.
    """
    path, n = trials.path, len(trials.path.segments)
    fine, shares = (FINER * probe,) * n, np.zeros(n)
    every = trials.run(rule, fine)

    def shift(k: int, count: int) -> float:
        counts = (*fine[:k], count, *fine[k + 1 :])
        rows, own = shared_rows(path, fine, counts)
        return min(1.0, trials.compare(every.taken(rows), trials.run(rule, counts).taken(own)).relative)

    left = _error(trials, rule, fine, probe) / (16.0 * n)
    for k, segment in enumerate(path.segments):
        if np.any(segment.durations > 0.0) and shift(k, 1) > inert:
            shares[k] = max(shift(k, probe), left)
    return shares


def added(trials: Trials, rule: Rule, probe: int, inert: float) -> FloatArray:
    """How much error that adds; zero where it adds none, as where more increments only show more of what is wrong anyway."""
    n = len(trials.path.segments)
    fine, shares = (FINER * probe,) * n, np.zeros(n)
    left = _error(trials, rule, fine, probe)
    for k, segment in enumerate(trials.path.segments):
        if np.any(segment.durations > 0.0):
            more = _error(trials, rule, (*fine[:k], probe, *fine[k + 1 :]), probe) - left
            shares[k] = more if more > inert else 0.0
    return shares


def _error(trials: Trials, rule: Rule, counts: Counts, probe: int) -> float:
    at = judging_count(pieces_of(trials.path), probe) if trials.runner.thorough else probe
    return min(1.0, trials.difference(rule, counts, at=(at,) * len(counts)).relative)
