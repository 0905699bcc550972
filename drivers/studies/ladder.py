"""The error of one rule over a ladder of increment counts."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.path import Path
from drivers.studies.trial import Counts, Rule, Trials

__all__ = ["RuleResult", "Rung", "climb", "total_increments"]

LARGEST_RUN = 150_000
"""Increments of a run at most; a rule that needs more is said to need more."""

FIRST = 8
"""Increments of each straight segment on the common grid on which all runs of a ladder are judged."""

RUNGS = (1, 2, 4, 8, 16, 32, 64, 128)
FEWEST_RUNGS = 5
NOISE = 10.0
"""Errors below this many reference bounds do not count for the order."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Rung:
    """Increments of a whole run, and its error as a fraction of the peak."""

    increments: int
    relative_error: float


@dataclass(frozen=True, slots=True, kw_only=True)
class RuleResult:
    """What a ladder of counts shows of a rule.

    Parameters
    ----------
    rule : Rule
    errors : tuple of Rung
    order : float or None
        Observed order of convergence; None where the errors are too small, or do not fall yet, to tell.
    increments_needed : int or None
        Fewest increments found, the same in every segment, whose error was measured within the tolerance; None where
        that takes more than `LARGEST_RUN`.
    """

    rule: Rule
    errors: tuple[Rung, ...]
    order: float | None
    increments_needed: int | None


def grid(path: Path) -> Counts:
    """Increments of the grid that all rungs share."""
    return tuple(FIRST if segment.durations.size == 1 else 1 for segment in path.segments)


def total_increments(path: Path, counts: Counts) -> int:
    """Increments of the whole run with these counts, cycles counted."""
    per_segment = [
        int(np.where(segment.durations > 0.0, count, 1).sum())
        for segment, count in zip(path.segments, counts, strict=True)
    ]
    return sum(per_segment[index] for index, _, _ in path.unrolled())


def climb(trials: Trials, rule: Rule, tolerance: float) -> RuleResult:
    """Double the increments until the error is well below the tolerance, and find the count that just meets it.

    Parameters
    ----------
    trials : Trials
    rule : Rule
    tolerance : float

    Returns
    -------
    RuleResult
    """
    base = grid(trials.path)
    bound = trials.reference(base).relative_bound
    errors: dict[int, float] = {}
    for factor in RUNGS:
        counts = tuple(factor * n for n in base)
        if total_increments(trials.path, counts) > LARGEST_RUN:
            break
        errors[factor] = trials.difference(rule, counts, at=base).relative
        if len(errors) >= FEWEST_RUNGS and errors[factor] < 0.25 * tolerance:
            break
    rungs = tuple(
        Rung(increments=total_increments(trials.path, tuple(f * n for n in base)), relative_error=e)
        for f, e in errors.items()
    )
    order = _observed_order(errors, bound)
    needed = _needed(trials, rule, tolerance, base, errors, order)
    return RuleResult(rule=rule, errors=rungs, order=order, increments_needed=needed)


def _observed_order(errors: dict[int, float], bound: float) -> float | None:
    """Slope over the last three rungs that stand clear of the reference solution's bound, where they agree on one."""
    clear = [(f, e) for f, e in errors.items() if e > NOISE * bound]
    if len(clear) < 3:
        return None
    slopes = [math.log(e1 / e2) / math.log(f2 / f1) for (f1, e1), (f2, e2) in zip(clear[-3:], clear[-2:], strict=False)]
    if min(slopes) < 0.2 or abs(slopes[1] - slopes[0]) > 0.5:
        return None
    return slopes[-1]


def _needed(
    trials: Trials, rule: Rule, tolerance: float, base: Counts, errors: dict[int, float], order: float | None
) -> int | None:
    """Fewest counts, in whole multiples of the grid, or fractions of it, that were run and met the tolerance."""

    def counts_of(factor: int) -> Counts:
        return tuple(factor * n for n in base)

    enough = [f for f, e in errors.items() if e <= tolerance and all(errors[g] <= tolerance for g in errors if g >= f)]
    if enough and min(enough) == 1:
        return _coarser(trials, rule, tolerance, base)
    high = min(enough) if enough else None
    low = max((f for f in errors if high is None or f < high), default=1)
    if high is None:
        slope = order or 1.0
        high = max(low + 1, math.ceil(low * (errors[low] / tolerance) ** (1.0 / slope) * 1.02))
        for _ in range(4):
            if total_increments(trials.path, counts_of(high)) > LARGEST_RUN:
                return None
            error = trials.difference(rule, counts_of(high), at=base).relative
            if error <= tolerance:
                break
            low, high = high, math.ceil(high * max(1.05, (error / tolerance) ** (1.0 / slope)))
        else:
            return None
    # Between a count that fails and one that holds: interpolate on the logarithms, then halve.
    for _ in range(3):
        if high - low <= max(1, low // 12):
            break
        middle = round(math.sqrt(low * high)) if high - low > 2 else low + 1
        middle = min(max(middle, low + 1), high - 1)
        if trials.difference(rule, counts_of(middle), at=base).relative <= tolerance:
            high = middle
        else:
            low = middle
    return total_increments(trials.path, counts_of(high))


def _coarser(trials: Trials, rule: Rule, tolerance: float, base: Counts) -> int:
    """The grid itself is enough: halve it while that still holds."""
    best = base
    for part in (2, 4, 8):
        counts = tuple(max(1, n // part) for n in base)
        if counts == best or trials.difference(rule, counts, at=base).relative > tolerance:
            break
        best = counts
    return total_increments(trials.path, best)
