"""Runs of one path with other increments and rules, each judged against the reference solution."""

from __future__ import annotations

from abc import ABC, abstractmethod
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

__all__ = ["OWN", "CardRunner", "Rule", "Runner", "Trials"]

Counts = tuple[int, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """An update rule: how the clock of an increment is found, and how the integral is carried over it."""

    shift_rule: str
    recursion: str

    def __str__(self) -> str:
        return f"{self.shift_rule}, {self.recursion}" if self != OWN else "its own rule"

    def routine(self, material: Material) -> LinearViscoelastic:
        """The built-in routine with this rule."""
        return LinearViscoelastic(
            material=material, recursion=find_recursion(self.recursion), shift_rule=find_shift_rule(self.shift_rule)
        )


OWN = Rule(shift_rule="its own", recursion="its own")
"""What a routine that is not ours does; it has no other."""


class Runner(ABC):
    """What is run along the paths of a study, and what it is judged against."""

    @property
    @abstractmethod
    def material(self) -> Material | None:
        """The material that it is meant to be, where that is known."""

    @property
    def basis(self) -> str:
        """What `truth` is, in words."""
        return "the reference solution"

    @abstractmethod
    def order(self, rule: Rule) -> float:
        """Order of convergence to expect of a rule."""

    @abstractmethod
    def run(self, rule: Rule, path: Path) -> History:
        """Response with the increments of the path."""

    @abstractmethod
    def truth(self, path: Path, accuracy: float) -> Reference:
        """What the response should be at the increment ends of the path."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CardRunner(Runner):
    """The built-in routine with any rule, judged against the reference solution."""

    material: Material

    def order(self, rule: Rule) -> float:
        """Second, unless one half of the rule is first."""
        return 1.0 if rule.recursion == "backward-euler" or rule.shift_rule in ("start", "end") else 2.0

    def run(self, rule: Rule, path: Path) -> History:
        """Response with the increments of the path."""
        return drive(rule.routine(self.material), path)

    def truth(self, path: Path, accuracy: float) -> Reference:
        """The reference solution."""
        return solve(self.material, path, accuracy=accuracy)


@dataclass(slots=True, kw_only=True, eq=False)
class Trials:
    """Judge runs of a path; what they are judged against is kept.

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

    def reference(self, counts: Counts) -> Reference:
        """Reference solution at the increment ends of the path with these counts."""
        if counts not in self.references:
            path = self.path.with_increments(counts)
            self.references[counts] = self.runner.truth(path, self.accuracy)
        return self.references[counts]

    def run(self, rule: Rule, counts: Counts) -> History:
        """Response with these increments."""
        history = self.runner.run(rule, self.path.with_increments(counts))
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
