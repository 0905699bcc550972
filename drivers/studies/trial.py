"""Runs of one path with other increments and rules, each judged against what it should give."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from drivers.difference import Difference, Where, largest_difference, shared_rows
from drivers.history import History
from drivers.path import Path
from drivers.point import ResponseError
from drivers.reference import Reference
from drivers.studies.runner import OWN, CardRunner, Rule, Runner
from drivers.studies.sampling import sampled
from matlib.arrays import FloatArray

__all__ = ["OWN", "CardRunner", "Counts", "Judged", "Rule", "Runner", "Trials", "total_increments"]

Counts = tuple[int, ...]
"""Increments of each straight piece, for each distinct segment of a path."""

SAMPLED_ROWS = 2000
"""Increment ends that a long run is judged on, if the path has no more pieces."""

SAMPLED_PART = 0.97
"""Part of the tolerance that such a run must keep."""

ROUNDING = 1e-10
"""A peak stress below this part of what the strains would cost elastically is rounding, and no response to judge on."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Judged:
    """Error of a run as a fraction of the peak, the bound of what it was judged on, and whether at all increment ends."""

    relative: float
    bound: float
    complete: bool

    def meets(self, tolerance: float) -> bool:
        """Whether the error is within a tolerance, with room for what lies between the ends that were judged."""
        return self.relative + self.bound <= (tolerance if self.complete else SAMPLED_PART * tolerance)


def total_increments(path: Path, counts: Counts) -> int:
    """Increments of the whole run with these counts, cycles counted."""
    return path.with_increments(counts).increment_count


@dataclass(slots=True, kw_only=True, eq=False)
class Trials:
    """Judge runs of a path; what they are judged against and the verdicts are kept, so that nothing is computed twice.

    Parameters
    ----------
    runner : Runner
    path : Path
    accuracy : float
        Of the reference solutions.
    done : callable, optional
        Called with 1 after each run.
    """

    runner: Runner
    path: Path
    accuracy: float
    done: Callable[[int], None] | None = None
    references: dict[Counts, Reference] = field(default_factory=dict)
    _paths: dict[Counts, Path] = field(default_factory=dict)
    _rows: dict[tuple[Counts, Counts], tuple[np.ndarray, np.ndarray]] = field(default_factory=dict)
    _samples: dict[Counts, tuple[Reference, np.ndarray] | None] = field(default_factory=dict)
    _differences: dict[tuple[Rule, Counts, Counts], Difference] = field(default_factory=dict)
    _errors: dict[tuple[Rule, Counts], Judged] = field(default_factory=dict)

    def reference(self, counts: Counts) -> Reference:
        """What the response should be at the increment ends of the path with these counts."""
        if counts not in self.references:
            self.references[counts] = self.runner.truth(self._path(counts), self.accuracy)
        return self.references[counts]

    def solutions(self) -> list[Reference]:
        """All that runs were judged against so far."""
        return [*self.references.values(), *(chosen[0] for chosen in self._samples.values() if chosen is not None)]

    def run(self, rule: Rule, counts: Counts) -> History:
        """Response at all increment ends."""
        history = self.runner.run(rule, self._path(counts))
        if self.done is not None:
            self.done(1)
        return history

    def _path(self, counts: Counts) -> Path:
        if counts not in self._paths:
            self._paths[counts] = self.path.with_increments(counts)
        return self._paths[counts]

    def difference(self, rule: Rule, counts: Counts, at: Counts | None = None) -> Difference:
        """Largest difference of a run from the reference solution, infinite where the run has no finite response.

        Parameters
        ----------
        rule : Rule
        counts : tuple of int
        at : tuple of int, optional
            Counts of the reference solution to judge on, at the rows that the two share; the run's own if left out.
        """
        judge = counts if at is None else at
        key = (rule, counts, judge)
        if key not in self._differences:
            rows, own = (None, None) if judge == counts else self._shared(judge, counts)
            self._differences[key] = self._largest(rule, counts, self.reference(judge), rows, own)
        return self._differences[key]

    def judge(self, rule: Rule, counts: Counts, at: Counts) -> Judged:
        """Largest relative difference from the reference solution, as thoroughly as a run of this length can be judged.

        Parameters
        ----------
        rule : Rule
        counts : tuple of int
        at : tuple of int
            Counts of a reference solution to use, at the rows that it shares with the run. Where these are not all increment
            ends of the run, a solution at chosen ends is made for these counts, unless control changes on the path or truth
            is dear.
        """
        if all(a % n == 0 for a, n in zip(at, counts, strict=True)):
            relative, bound = self.difference(rule, counts, at=at).relative, self.reference(at).relative_bound
            return Judged(relative=relative, bound=bound, complete=True)
        chosen = self._sample(counts)
        if chosen is None:
            relative, bound = self.difference(rule, counts, at=at).relative, self.reference(at).relative_bound
            return Judged(relative=relative, bound=bound, complete=False)
        if (rule, counts) not in self._errors:
            solution, rows = chosen
            relative = self._largest(rule, counts, solution, None, rows).relative
            self._errors[rule, counts] = Judged(relative=relative, bound=solution.relative_bound, complete=False)
        return self._errors[rule, counts]

    def _sample(self, counts: Counts) -> tuple[Reference, np.ndarray] | None:
        """Truth at chosen increment ends, and which rows of the run they are."""
        if counts not in self._samples:
            sample = sampled(self._path(counts), SAMPLED_ROWS) if self.runner.thorough else None
            self._samples[counts] = (
                None if sample is None else (self.runner.truth(sample.path, self.accuracy), sample.rows)
            )
        return self._samples[counts]

    def _shared(self, judge: Counts, counts: Counts) -> tuple[np.ndarray, np.ndarray]:
        if (judge, counts) not in self._rows:
            self._rows[judge, counts] = shared_rows(self.path, judge, counts)
        return self._rows[judge, counts]

    def _largest(
        self, rule: Rule, counts: Counts, solution: Reference, rows: np.ndarray | None, own: np.ndarray | None
    ) -> Difference:
        """Largest difference between some rows of a solution and of a run, all where None; infinite if there is no response."""
        truth = solution.history if rows is None else solution.history.taken(rows)
        try:
            response = self.run(rule, counts)
        except ResponseError as error:
            at = Where(segment=error.segment, time=error.time, temperature=self.path.start_temperature)
            return Difference(quantity="stress", component="s11", value=math.inf, relative=math.inf, at=at)
        response = response if own is None else response.taken(own)
        return self.compare(truth, response)

    def compare(self, first: History, second: History) -> Difference:
        """Largest difference of two responses with the same rows; a stress that is rounding does not count."""
        return largest_difference(first, second, negligible_stress=self._negligible(first.strain))

    def _negligible(self, strain: FloatArray) -> float:
        material = self.runner.material
        if material is None:
            return 0.0
        T_low, T_high = self.path.temperature_range
        stiffness = material.bulk.instantaneous + 4.0 / 3.0 * material.shear.instantaneous
        extent = float(np.abs(strain).max()) + 3.0 * abs(material.expansion) * (T_high - T_low)
        return ROUNDING * stiffness * extent
