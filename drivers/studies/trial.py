"""Runs of one path with other increments and rules, each judged against the reference solution."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from drivers.difference import Difference, largest_difference, shared_rows
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.reference import Reference, solve
from matlib.material import Material
from matlib.recursion import find_recursion
from matlib.shift import find_shift_rule
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["Rule", "Trials"]

Counts = tuple[int, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """An update rule: how the clock of an increment is found, and how the integral is carried over it."""

    shift_rule: str
    recursion: str

    def __str__(self) -> str:
        return f"{self.shift_rule}, {self.recursion}"

    def routine(self, material: Material) -> LinearViscoelastic:
        """The built-in routine with this rule."""
        return LinearViscoelastic(
            material=material, recursion=find_recursion(self.recursion), shift_rule=find_shift_rule(self.shift_rule)
        )


@dataclass(slots=True, kw_only=True, eq=False)
class Trials:
    """Judge runs of a path; reference solutions are kept.

    Parameters
    ----------
    material : Material
    path : Path
    accuracy : float
        Of the reference solutions.
    done : callable, optional
        Called with 1 after each run.
    """

    material: Material
    path: Path
    accuracy: float
    done: Callable[[int], None] | None = None
    references: dict[Counts, Reference] = field(default_factory=dict)

    def reference(self, counts: Counts) -> Reference:
        """Reference solution at the increment ends of the path with these counts."""
        if counts not in self.references:
            path = self.path.with_increments(counts)
            self.references[counts] = solve(self.material, path, accuracy=self.accuracy)
        return self.references[counts]

    def run(self, rule: Rule, counts: Counts) -> History:
        """Response with these increments."""
        history = drive(rule.routine(self.material), self.path.with_increments(counts))
        if self.done is not None:
            self.done(1)
        return history

    def difference(self, rule: Rule, counts: Counts, at: Counts | None = None) -> Difference:
        """Largest difference of a run from the reference solution.

        Parameters
        ----------
        rule : Rule
        counts : tuple of int
            Increments of each distinct segment.
        at : tuple of int, optional
            Counts of the reference solution to judge on, where the two share rows; the run's own if left out.
        """
        judge = counts if at is None else at
        truth, response = self.reference(judge).history, self.run(rule, counts)
        if judge != counts:
            rows, own = shared_rows(self.path, judge, counts)
            truth, response = truth.taken(rows), response.taken(own)
        return largest_difference(truth, response)
