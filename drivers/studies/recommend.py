"""Increments for each segment: a dwell and a quench need different ones."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.path import Path, Segment, fractions
from drivers.studies.shares import AIM, added, moved, pieces_by_segment, weights_of
from drivers.studies.trial import Counts, Judged, Rule, Trials, total_increments
from matlib.arrays import FloatArray

__all__ = ["Advice", "Recommendation", "recommend"]

WASTEFUL = 0.5
"""A run whose error is a smaller share of the tolerance than this takes more increments than it has to."""

ROUNDS = 20

FINE = 64
"""From this many on, the increments of a segment are a whole number from 32 to 64 times a power of two, so that runs are nested."""

JUDGED_ROWS, FEW_ROWS = 10_000, 1000
"""Increment ends that truth is asked for at most, and where it is dear; of longer runs at every second, fourth ... of them."""


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
        Verified by a run at its own increment ends; None where that takes more than the runner's largest run.

    Notes
    -----
    Coarsening one segment at a time shows its share of the error, ``C n**-p``. The least increments whose shares sum to the
    tolerance have ``n`` in proportion to ``(C / rounds)**(1/(p+1))``. Their common size is then searched by runs, and where
    whole numbers leave it too fine, increments are taken off single segments.
    """
    search = _Search(trials=trials, rule=rule, tolerance=tolerance)
    tries = (search.scaled(*weights_of(trials, rule, tolerance, shares)) for shares in (moved, added))
    counts = next((found for found in tries if found is not None), None)
    if counts is None:
        return None
    counts = search.trimmed(counts)
    path = trials.path
    return Recommendation(
        advice=tuple(_advice(path, segment, n) for segment, n in zip(path.segments, counts, strict=True)),
        counts=counts,
        increments=total_increments(path, counts),
        relative_error=search.error(counts),
    )


@dataclass(slots=True, kw_only=True, eq=False)
class _Search:
    """Runs of one rule, each judged at its own increment ends."""

    trials: Trials
    rule: Rule
    tolerance: float

    def judge(self, counts: Counts) -> Judged:
        return self.trials.judge(self.rule, counts, self._at(counts))

    def error(self, counts: Counts) -> float:
        return self.judge(counts).relative

    def meets(self, counts: Counts) -> bool:
        return self.judge(counts).meets(self.tolerance)

    def frugal(self, counts: Counts) -> bool:
        return self.meets(counts) and (self.error(counts) >= WASTEFUL * self.tolerance or max(counts) == 1)

    def _at(self, counts: Counts) -> Counts:
        rows = JUDGED_ROWS if self.trials.runner.thorough else FEW_ROWS
        while total_increments(self.trials.path, counts) > rows:
            halved = tuple(n // 2 if n >= FINE and n % 2 == 0 else n for n in counts)
            if halved == counts:
                break
            counts = halved
        return counts

    def scaled(self, weights: FloatArray, size: float, order: float) -> Counts | None:
        """The smallest multiple of `weights` found whose run meets the tolerance."""
        largest = self.trials.runner.largest_run / max(1.0, float(weights @ pieces_by_segment(self.trials.path)))
        low, high, before = 0.0, math.inf, math.inf  # sizes; the largest weight is 1
        best: Counts | None = None
        size = min(size, largest)
        for _ in range(ROUNDS):
            counts = tuple(_nested(size * w) for w in weights)
            error = min(1.0, self.error(counts))
            if self.meets(counts):
                high, best = size, counts
                if self.frugal(counts):
                    break
            else:
                low = size
            if low >= largest or high - low < 1.0:
                break
            wanted = size * (max(error, 1e-3 * self.tolerance) / (AIM * self.tolerance)) ** (1.0 / order)
            if high == math.inf:  # an error that hardly falls yet is left behind in larger strides
                size = min(max(wanted, (2.0 if error > 0.7 * before else 1.0) * size), largest)
            else:
                size = wanted if low < wanted < high else math.sqrt(max(low, 0.25 * high) * high)
            before = error
        return best

    def trimmed(self, counts: Counts) -> Counts:
        """Take increments off single segments, as many as the tolerance allows, where the run is finer than it has to be."""
        for k in sorted(range(len(counts)), key=lambda k: -counts[k]):
            low, high = 0, counts[k]
            while low < (middle := _nested((low + high) / 2)) < high and not self.frugal(counts):
                fewer = (*counts[:k], middle, *counts[k + 1 :])
                if self.meets(fewer):
                    high, counts = middle, fewer
                else:
                    low = middle
        return counts


def _nested(wanted: float) -> int:
    """A whole number of increments, at least as many as wanted.

    Examples
    --------
    >>> _nested(0.2), _nested(63.5), _nested(1000.0)
    (1, 64, 1008)
    """
    count = max(1, math.ceil(wanted))
    step = 2 ** max(0, math.ceil(math.log2(count / FINE)))
    return step * -(-count // step)


def _advice(path: Path, segment: Segment, count: int) -> Advice:
    longest = float(segment.durations.max())
    share = float(fractions(count, segment.spacing, count - 1, count)[1][0]) if longest > 0.0 else 1.0
    return Advice(
        segment=segment.label,
        increments=count,
        largest_increment=longest * share,
        largest_temperature_change=_temperature_change(path, segment, share),
    )


def _temperature_change(path: Path, wanted: Segment, share: float) -> float:
    """Largest over an increment of a segment, wherever it runs, the longest being `share` of its piece; a jump is one [K]."""
    T, largest = path.start_temperature, 0.0
    for _, _, segment in path.unrolled():
        ends = segment.temperatures
        if ends is None:
            continue
        if segment is wanted:
            changes = np.abs(np.diff(ends, prepend=T)) * np.where(segment.durations > 0.0, share, 1.0)
            largest = max(largest, float(changes.max()))
        T = float(ends[-1])
    return largest
