"""What a study of increments runs, and what it judges it against."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, field

from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.reference import Reference, solve
from drivers.studies.plan import Plan, laid_out
from matlib.material import Material
from matlib.recursion import find_recursion
from matlib.shift import find_shift_rule
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["OWN", "CardRunner", "Rule", "Runner"]

KEPT_ROWS = 1_000_000
"""Increment ends that are kept laid out, before the oldest paths go."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """An update rule: how the clock of an increment is found, and how the integral is carried over it."""

    shift_rule: str = "integrated"
    recursion: str = "exponential"

    @classmethod
    def of_names(cls, shift_rule: str | None, recursion: str | None) -> Rule:
        """With the defaults where no name is given."""
        named = {"shift_rule": shift_rule, "recursion": recursion}
        return cls(**{part: name for part, name in named.items() if name})

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

    @property
    def thorough(self) -> bool:
        """Whether `truth` is cheap enough to be asked for at the increment ends of every run."""
        return self.material is not None

    @property
    def largest_run(self) -> int:
        """Increments of a run at most; what needs more is said to need more."""
        return 50_000

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
    _plans: dict[Path, Plan | None] = field(default_factory=dict)

    @property
    def largest_run(self) -> int:
        """More than anyone would want to run."""
        return 200_000

    def order(self, rule: Rule) -> float:
        """Second, unless one half of the rule is first."""
        return 1.0 if rule.shift_rule in ("start", "end") else float(find_recursion(rule.recursion).order)

    def run(self, rule: Rule, path: Path) -> History:
        """Response with the increments of the path, as `drive` gives it, to rounding.

        Where every component is controlled in one way throughout, the increments are laid out once for all rules, and those
        of many short segments are taken in one call.
        """
        if path not in self._plans:
            self._plans[path] = laid_out(path)
            while len(self._plans) > 1 and sum(len(plan) for plan in self._plans.values() if plan) > KEPT_ROWS:
                self._plans.pop(next(iter(self._plans)))
        plan, routine = self._plans[path], rule.routine(self.material)
        history = None if plan is None else plan.run(routine, plan.clock(self.material, rule.shift_rule))
        # Where control changes, and where a response is not finite and `drive` says where.
        return drive(routine, path) if history is None else history

    def truth(self, path: Path, accuracy: float) -> Reference:
        """The reference solution."""
        return solve(self.material, path, accuracy=accuracy)
