"""The error of one rule over a ladder of increment counts, the same in every segment."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.path import Path
from drivers.studies.trial import Counts, Judged, Rule, Trials

__all__ = ["RuleResult", "Rung", "climb", "judging_count", "observed_order", "pieces_of"]

FIRST = 8
"""Increments of each straight piece on the first rung."""

LARGEST_FACTOR = 128
FEWEST_RUNGS = 4

JUDGED_ROWS = 2000
"""Increment ends that the reference solution is made for, if the path has no more pieces."""

SETTLED = 0.1
"""Two slopes in a row that differ by no more than this are an order of convergence."""

HOPELESS = 1.5
"""Where the order that was seen leads so many times beyond the largest run, it is not tried."""

FAR_APART = 16
LOWEST = 0.5
"""Slopes up to this say that the increments are still too long for an order to show."""

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
        Each twice as fine as the one before; without those that had no finite response.
    order : float or None
        Observed order of convergence; None where the errors are too small, or do not fall evenly yet, to tell.
    increments_needed : int or None
        Fewest increments of the whole run, the same in every straight piece, whose run was within the tolerance; the next
        fewer that were tried, an eighth fewer or one, were not. None where that takes more than the runner's largest run.
    each_needed : int or None
        The same for one straight piece.
    """

    rule: Rule
    errors: tuple[Rung, ...]
    order: float | None
    increments_needed: int | None
    each_needed: int | None


def pieces_of(path: Path) -> int:
    """Straight pieces of the whole run that take time, cycles counted."""
    return sum(int(np.count_nonzero(segment.durations)) for _, _, segment in path.unrolled())


def judging_count(pieces: int, count: int) -> int:
    """Increments of each piece in the reference solution that a run with `count` is judged on.

    All counts that are an odd number up to 15 times a power of two share few reference solutions: one for each odd number.

    Examples
    --------
    >>> judging_count(10, 24), judging_count(10, 1200), judging_count(10_000, 3)
    (192, 150, 1)
    """
    odd = count // (count & -count)
    rows = max(1, pieces) * odd
    return 1 if rows > JUDGED_ROWS else odd * 2 ** int(math.log2(JUDGED_ROWS / rows))


def lattice(largest: int) -> list[int]:
    """Counts that are tried: every one up to 16, then eight in every doubling.

    Examples
    --------
    >>> lattice(36)[14:]
    [15, 16, 18, 20, 22, 24, 26, 28, 30, 32, 36]
    """
    counts = list(range(1, 16))
    power = 2
    while counts[-1] < largest:
        counts += [power * k for k in range(8, 16)]
        power *= 2
    return [n for n in counts if n <= largest]


@dataclass(slots=True, kw_only=True, eq=False)
class _Climb:
    """One rule on one path, the same count in every piece."""

    trials: Trials
    rule: Rule
    tolerance: float
    pieces: int
    jumps: int

    def counts(self) -> list[int]:
        """Counts that may be tried, the grid where truth is dear among their divisors."""
        largest = self.trials.runner.largest_run
        every = lattice(largest) if self.trials.runner.thorough else [1, 2, 4, *(FIRST * n for n in lattice(largest))]
        return [n for n in every if n == 1 or self.total(n) <= largest]

    def judge(self, count: int) -> Judged:
        at = judging_count(self.pieces, count) if self.trials.runner.thorough else FIRST
        return self.trials.judge(self.rule, self._every(count), self._every(at))

    def error(self, count: int) -> float:
        return self.judge(count).relative

    def total(self, count: int) -> int:
        return self.jumps + self.pieces * count

    def meets(self, count: int) -> bool:
        return self.judge(count).meets(self.tolerance)

    def _every(self, count: int) -> Counts:
        return (count,) * len(self.trials.path.segments)


def climb(trials: Trials, rule: Rule, tolerance: float) -> RuleResult:
    """Double the increments until the order shows and the tolerance is met, and find the count that just meets it.

    Parameters
    ----------
    trials : Trials
    rule : Rule
    tolerance : float

    Returns
    -------
    RuleResult
    """
    pieces = pieces_of(trials.path)
    jumps = trials.path.with_increments(1).increment_count - pieces
    runs = _Climb(trials=trials, rule=rule, tolerance=tolerance, pieces=pieces, jumps=jumps)
    first = FIRST if all(segment.durations.size == 1 for segment in trials.path.segments) else 1
    errors: dict[int, float] = {}
    for count in (first * 2**k for k in range(int(math.log2(LARGEST_FACTOR)) + 1)):
        if errors and runs.total(count) > trials.runner.largest_run:
            break
        errors[count] = runs.error(count)
        floor = NOISE * runs.judge(count).bound
        settled = observed_order(errors, floor) is not None or errors[count] <= floor
        if len(errors) >= FEWEST_RUNGS and settled and errors[count] <= tolerance:
            break
    order = observed_order(errors, floor)
    needed = _needed(runs, errors, order)
    return RuleResult(
        rule=rule,
        errors=tuple(Rung(increments=runs.total(n), relative_error=e) for n, e in errors.items() if e < math.inf),
        order=order,
        increments_needed=None if needed is None else runs.total(needed),
        each_needed=needed,
    )


def observed_order(errors: dict[int, float], floor: float) -> float | None:
    """Slope over the last three counts whose errors stand clear of `floor`, where they agree on one.

    Examples
    --------
    >>> round(observed_order({8: 4e-2, 16: 1.01e-2, 32: 2.5e-3}, 1e-9), 2)
    2.01
    >>> observed_order({8: 4e-2, 16: 3e-2, 32: 1e-3}, 1e-9) is None
    True
    """
    clear = [(n, e) for n, e in errors.items() if floor < e < math.inf]
    if len(clear) < 3:
        return None
    (n1, e1), (n2, e2), (n3, e3) = clear[-3:]
    slopes = math.log(e1 / e2) / math.log(n2 / n1), math.log(e2 / e3) / math.log(n3 / n2)
    return slopes[1] if min(slopes) > LOWEST and abs(slopes[1] - slopes[0]) <= SETTLED else None


def _needed(runs: _Climb, errors: dict[int, float], order: float | None) -> int | None:
    """Fewest count tried that holds, and whose neighbour below does not."""
    counts = runs.counts()
    high = None
    for count in reversed(errors):
        if not runs.meets(count):
            break
        high = count
    low = max((n for n in errors if high is None or n < high), default=0)
    while high is None:
        beyond = [n for n in counts if n > low]
        excess = max(1.0, runs.error(low) / runs.tolerance)
        guess = low * (excess ** (1.0 / (order or 1.0)) if excess < math.inf else 2.0)
        if not beyond or (order is not None and guess > HOPELESS * beyond[-1]):
            return None
        count = min((n for n in beyond if n >= guess), default=beyond[-1])
        low, high = (low, count) if runs.meets(count) else (count, None)
    while between := [n for n in counts if low < n < high]:
        count = _between(between, low, high, runs)
        low, high = (low, count) if runs.meets(count) else (count, high)
    return high


def _between(between: list[int], low: int, high: int, runs: _Climb) -> int:
    """The count at which the line between two errors meets the tolerance; the middle where that says little."""
    middle = between[len(between) // 2]
    if low == 0 or len(between) > FAR_APART:
        return middle
    above, below = runs.error(low), runs.error(high)
    if not math.inf > above > runs.tolerance > below > 0.0:
        return middle
    wanted = low * (high / low) ** (math.log(above / runs.tolerance) / math.log(above / below))
    return min((n for n in between if n >= wanted), default=between[-1])
