"""Which segment the error of a run comes from, and why."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from drivers.difference import Difference
from drivers.studies.defect import Defect, largest_defect
from drivers.studies.runner import OWN, Rule
from drivers.studies.trial import Counts, Trials, total_increments

__all__ = ["Blame", "find_blame"]

FINER = 8
HALF = 0.5


@dataclass(frozen=True, slots=True, kw_only=True)
class Blame:
    """Where the error arises and why.

    Parameters
    ----------
    segment : str
        Label of the segment whose own increments make the largest part of the error.
    share : float
        Error that this segment alone makes, as a fraction of the peak.
    most : bool
        Whether that is more than half of the whole error.
    cause : {"clock", "recursion", "free strain", "its own"}
        Whether the reduced time of increments is off; or what is done with it; or neither, and it is the strain of free
        components, which an update takes as straight over an increment, that bends. A routine that is not ours does not tell.
    rule : Rule
    defect : Defect or None
        The increment of that segment that goes most wrong; None where no material is known.
    """

    segment: str
    share: float
    most: bool
    cause: str
    rule: Rule
    defect: Defect | None


def find_blame(trials: Trials, rule: Rule, counts: Counts, own: Difference) -> Blame | None:
    """Refine every segment but one, one after the other; the one that keeps most of the error is to blame.

    Parameters
    ----------
    trials : Trials
    rule : Rule
    counts : tuple of int
        The path's own increments.
    own : Difference
        Their error.

    Returns
    -------
    Blame or None
        None where the error is within the reference solution's bound.
    """
    if own.relative <= 2.0 * trials.reference(counts).relative_bound:
        return None
    path = trials.path
    finer = max(2, min(FINER, 2 * trials.runner.largest_run // total_increments(path, counts)))
    errors = [
        trials.difference(rule, _coarse_in(k, counts, finer), at=counts).relative
        if np.any(segment.durations > 0.0)
        else 0.0
        for k, segment in enumerate(path.segments)
    ]
    worst = int(np.argmax(errors))
    material = trials.runner.material
    defect = None if material is None else largest_defect(trials, material, rule, counts, worst)
    return Blame(
        segment=path.segments[worst].label,
        share=errors[worst],
        most=errors[worst] > HALF * own.relative,
        cause=_cause(trials, rule, counts, _coarse_in(worst, counts, finer), worst, defect),
        rule=rule,
        defect=defect,
    )


def _coarse_in(k: int, counts: Counts, finer: int) -> Counts:
    return tuple(n if j == k else finer * n for j, n in enumerate(counts))


def _cause(trials: Trials, rule: Rule, counts: Counts, mixed: Counts, worst: int, defect: Defect | None) -> str:
    """The clock where the exact one takes away half of the error; free strains where straight ones would make no half of it."""
    if rule == OWN or defect is None:
        return "its own"
    error = trials.difference(rule, mixed, at=counts).relative
    exact = Rule(shift_rule="integrated", recursion=rule.recursion)
    if rule != exact and trials.difference(exact, mixed, at=counts).relative < HALF * error:
        return "clock"
    free = bool(trials.path.segments[worst].stress_controlled.any())
    return "free strain" if free and defect.sum < HALF * error else "recursion"
