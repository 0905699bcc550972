"""How small must the increments of a path be, by rule; and what do the path's own give?"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from drivers.difference import Difference, relative_gaps
from drivers.path import Path
from drivers.studies.blame import Blame, find_blame
from drivers.studies.ladder import RuleResult, climb
from drivers.studies.recommend import Recommendation, recommend
from drivers.studies.runner import CardRunner, Rule, Runner
from drivers.studies.trial import Counts, Trials
from matlib.arrays import FloatArray
from matlib.errors import ParameterError
from matlib.material import Material

__all__ = ["Course", "Rule", "StepsResult", "steps"]

TIGHTEST = 1e-9
"""Smallest tolerance: below it the reference solution itself would have to be bounded more tightly than rounding allows."""

SHARPNESS = 1e-3
"""Half-width of the reference solutions as a part of the tolerance."""

FINEST, COARSEST = 1e-10, 1e-5


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Course:
    """The error of a run over its time.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Increment ends [s].
    error : ndarray, shape (n,)
        Largest over the components, as a fraction of the peak.
    segment : tuple of str, length n
        Label of the segment that each row ends an increment of.
    """

    time: FloatArray
    error: FloatArray
    segment: tuple[str, ...]


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
        Error of the path's own increments; infinite where the rule has no finite response with them.
    course : Course
        The same over the time of the path.
    own_bound : float
        Half-width of the reference solution that this was judged on, as a fraction of the peak.
    reference_bound : float
        Largest relative half-width of the reference solutions that were used.
    estimated : bool
        Whether that bound is an estimate.
    rules : tuple of RuleResult
    recommended : Recommendation or None
        None where nothing up to `largest_run` meets the tolerance.
    blame : Blame or None
        Which segment the own error comes from, and why; None where there is no error to speak of.
    largest_run : int
        Increments beyond which nothing was tried.
    basis : str
        What the errors are judged on, in words.
    """

    path: Path
    tolerance: float
    rule: Rule
    own: Difference
    course: Course
    own_bound: float
    reference_bound: float
    estimated: bool
    rules: tuple[RuleResult, ...]
    recommended: Recommendation | None
    blame: Blame | None
    largest_run: int
    basis: str = "the reference solution"

    @property
    def holds(self) -> bool:
        """Whether the path's own increments meet the tolerance, the reference solution's bound allowed for."""
        return self.own.relative + self.own_bound <= self.tolerance


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
    accuracy = min(COARSEST, max(FINEST, SHARPNESS * tolerance))
    runner = subject if isinstance(subject, Runner) else CardRunner(material=subject)
    trials = Trials(runner=runner, path=path, accuracy=accuracy, done=progress)
    counts = tuple(segment.increments for segment in path.segments)
    own = trials.difference(rule, counts)
    course = _course(trials, rule, counts, own)
    recommended = recommend(trials, rule, tolerance)
    blame = find_blame(trials, rule, counts, own) if own.relative < math.inf else None
    climbed = tuple(climb(trials, one, tolerance) for one in rules)
    solutions = trials.solutions()
    return StepsResult(
        path=path,
        tolerance=tolerance,
        rule=rule,
        own=own,
        course=course,
        own_bound=trials.reference(counts).relative_bound,
        reference_bound=max(solution.relative_bound for solution in solutions),
        estimated=any(solution.estimated for solution in solutions),
        rules=climbed,
        recommended=recommended,
        blame=blame,
        largest_run=runner.largest_run,
        basis=runner.basis,
    )


def _course(trials: Trials, rule: Rule, counts: Counts, own: Difference) -> Course:
    """Nothing but zeros where the run has no finite response."""
    truth = trials.reference(counts).history
    error = np.zeros(len(truth))
    if own.relative < math.inf:
        error = relative_gaps(truth, trials.run(rule, counts), own.quantity)
    return Course(time=truth.time, error=error, segment=truth.segment)
