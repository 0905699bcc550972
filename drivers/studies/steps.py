"""How small must the increments of a path be, by rule; and what do the path's own give?"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from drivers.difference import Difference
from drivers.path import Path
from drivers.studies.blame import Blame, find_blame
from drivers.studies.ladder import RuleResult, climb
from drivers.studies.recommend import Recommendation, recommend
from drivers.studies.trial import CardRunner, Rule, Runner, Trials
from matlib.errors import ParameterError
from matlib.material import Material

__all__ = ["Rule", "StepsResult", "steps"]

TIGHTEST = 1e-9
"""Smallest tolerance: below it the reference solution itself would have to be bounded more tightly than rounding allows."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StepsResult:
    """What a study of increments found.

    Parameters
    ----------
    path : Path
    tolerance : float
        Fraction of the path's peak.
    rule : Rule
        The rule that `own` and `recommended` are for.
    own : Difference
        Error of the path's own increments.
    reference_bound : float
        Largest relative half-width of the reference solutions that were used.
    estimated : bool
        Whether that bound is an estimate.
    rules : tuple of RuleResult
    recommended : Recommendation or None
        None where no count within the limit meets the tolerance.
    blame : Blame or None
        Which segment the own error comes from, and why; None where there is no error to speak of.
    basis : str
        What the errors are judged on, in words.
    """

    path: Path
    tolerance: float
    rule: Rule
    own: Difference
    reference_bound: float
    estimated: bool
    rules: tuple[RuleResult, ...]
    recommended: Recommendation | None
    blame: Blame | None
    basis: str = "the reference solution"

    @property
    def holds(self) -> bool:
        """Whether the path's own increments meet the tolerance, the reference solution's bound allowed for."""
        return self.own.relative + self.reference_bound <= self.tolerance


def steps(
    subject: Material | Runner,
    path: Path,
    *,
    tolerance: float,
    rule: Rule,
    rules: Sequence[Rule],
    progress: Callable[[int], None] | None = None,
) -> StepsResult:
    """Study the increments of a path.

    Parameters
    ----------
    subject : Material or Runner
        What a card says, or what is run in its place.
    path : Path
    tolerance : float
        Largest error that passes, as a fraction of the path's peak, from `TIGHTEST` to 1.
    rule : Rule
        The rule to recommend increments for.
    rules : sequence of Rule
        Rules to climb a ladder of counts with.
    progress : callable, optional
        Called with 1 after each run.

    Returns
    -------
    StepsResult

    Raises
    ------
    ParameterError
        If the tolerance is out of range.
    ShiftRangeError
        If the path leads the shift law where it has no answer.
    """
    if not (math.isfinite(tolerance) and TIGHTEST <= tolerance <= 1.0):
        raise ParameterError("tolerance", f"from {TIGHTEST:g} to 1", tolerance)
    accuracy = min(1e-7, max(1e-10, 0.01 * tolerance))
    runner = subject if isinstance(subject, Runner) else CardRunner(material=subject)
    trials = Trials(runner=runner, path=path, accuracy=accuracy, done=progress)
    counts = tuple(segment.increments for segment in path.segments)
    own = trials.difference(rule, counts)
    recommended = recommend(trials, rule, tolerance)
    blame = find_blame(trials, rule, counts, own)
    climbed = tuple(climb(trials, one, tolerance) for one in rules)
    references = trials.references.values()
    return StepsResult(
        path=path,
        tolerance=tolerance,
        rule=rule,
        own=own,
        reference_bound=max(reference.relative_bound for reference in references),
        estimated=any(reference.estimated for reference in references),
        rules=climbed,
        recommended=recommended,
        blame=blame,
        basis=runner.basis,
    )
