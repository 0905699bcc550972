"""Does a routine that is not ours say what a card says, or what another routine says?"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from drivers.difference import largest_difference
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.reference import solve
from drivers.studies.compare import LARGEST_RUN, Comparison, PathComparison, ShiftDifference, rounding_bound, verdict
from matlib.arrays import FloatArray
from matlib.errors import ParameterError, ShiftRangeError
from matlib.material import Material
from matlib.routine import Increment, Routine

__all__ = ["CardSide", "RoutineSide", "Side", "compare_routines"]

EPS = float(np.finfo(np.float64).eps)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Answer:
    """A response at the increment ends of a path.

    Parameters
    ----------
    history : History
    stress_bound, strain_bound : ndarray
        Half-widths of each row [Pa], [-]; zero where the response counts as it is.
    estimated : bool
        Whether they are estimates.
    rounding : float
        What rounding alone can make of the response, as a fraction of its peak.
    """

    history: History
    stress_bound: FloatArray
    strain_bound: FloatArray
    estimated: bool
    rounding: float


class Side(Protocol):
    """One of the two things that are compared."""

    @property
    def is_routine(self) -> bool:
        """Whether its answers depend on increments."""

    def answer(self, path: Path) -> Answer:
        """Its response; `ShiftRangeError` where it has none."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CardSide:
    """A card: the reference solution, whatever the increments."""

    material: Material

    @property
    def is_routine(self) -> bool:
        """No."""
        return False

    def answer(self, path: Path) -> Answer:
        """The reference solution at the increment ends of the path."""
        reference = solve(self.material, path)
        history = reference.history
        assert history.bound is not None
        return Answer(
            history=history,
            stress_bound=history.bound,
            strain_bound=reference.strain_bound,
            estimated=reference.estimated,
            rounding=rounding_bound(self.material, path, history),
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RoutineSide:
    """A routine: its own run, with the path's own increments."""

    routine: Routine

    @property
    def is_routine(self) -> bool:
        """Yes."""
        return True

    def answer(self, path: Path) -> Answer:
        """What it does on the path."""
        history = drive(self.routine, path)
        nothing = np.zeros(len(history))
        return Answer(
            history=history,
            stress_bound=nothing,
            strain_bound=nothing,
            estimated=False,
            rounding=self._rounding(path, history),
        )

    def _rounding(self, path: Path, history: History) -> float:
        """One rounding an increment, on a stress as large as the stiffness times the largest strain."""
        T, rest = path.start_temperature, np.zeros(6)
        jump = Increment(time=0.0, duration=0.0, temperature=(T, T), strain=(rest, rest))
        tangent = self.routine.update(jump, np.zeros(self.routine.memory_size)).tangent
        stiffest = float(np.abs(tangent).max()) * float(np.abs(history.strain).max())
        magnified = max(1.0, stiffest / history.peak_stress) if history.peak_stress > 0.0 else 1.0
        return 4.0 * EPS * (path.increment_count + 8.0) * magnified


def compare_routines(
    a: Side, b: Side, paths: Sequence[Path], *, tolerance: float, progress: Callable[[int], None] | None = None
) -> Comparison:
    """Compare the responses of two sides of which one at least is a routine.

    Parameters
    ----------
    a, b : Side
    paths : sequence of Path
        At least one; their increments are those that a routine is driven with.
    tolerance : float
        Largest difference that passes, as a fraction of a path's peak, ``>= 0``.
    progress : callable, optional
        Called with 1 after each path.

    Returns
    -------
    Comparison

    Raises
    ------
    RoutineFailureError
        If a routine fails.
    """
    if not 0.0 <= tolerance < np.inf:
        raise ParameterError("tolerance", "finite and >= 0", tolerance)
    if not paths:
        raise ParameterError("paths", "at least one path", "none")
    results = []
    for path in paths:
        results.append(_compared(a, b, path, tolerance))
        if progress is not None:
            progress(1)
    return Comparison(
        same=verdict(results),
        tolerance=tolerance,
        shift=ShiftDifference(decades=None, temperature=None, reason="a routine does not tell its own"),
        paths=tuple(results),
        basis="two runs with the path's own increments"
        if a.is_routine and b.is_routine
        else "the card's reference solution and the routine's run with the path's own increments",
        judges_increments=not (a.is_routine and b.is_routine),
    )


def _compared(a: Side, b: Side, path: Path, tolerance: float) -> PathComparison:
    if path.increment_count > LARGEST_RUN:
        expected = f"at most {LARGEST_RUN} increments long, repeats counted"
        raise ParameterError(f"path {path.name!r}", expected, path.increment_count)
    answers: list[Answer | None] = []
    reasons = []
    for which, side in (("first", a), ("second", b)):
        try:
            answers.append(side.answer(path))
        except ShiftRangeError as error:
            answers.append(None)
            reasons.append(f"{which}: {error}")
    one, other = answers
    if one is None or other is None:
        return PathComparison(
            path=path,
            difference=None,
            rounding=0.0,
            identical=False,
            bound=0.0,
            estimated=False,
            holds=False,
            first=None if one is None else one.history,
            second=None if other is None else other.history,
            reason="; ".join(reasons),
        )
    difference = largest_difference(one.history, other.history)
    bound, rounding = _bound(one, other), one.rounding + other.rounding
    identical = difference.relative <= rounding
    return PathComparison(
        path=path,
        difference=difference,
        rounding=rounding,
        identical=identical,
        bound=0.0 if identical else bound,
        estimated=one.estimated or other.estimated,
        holds=identical or difference.relative + bound <= tolerance,
        first=one.history,
        second=other.history,
    )


def _bound(one: Answer, other: Answer) -> float:
    """Half-widths of both answers as a fraction of the peaks of the first."""
    shares = []
    for bound, values in (
        (one.stress_bound + other.stress_bound, one.history.stress_components),
        (one.strain_bound + other.strain_bound, one.history.strain_components),
    ):
        peak = float(np.abs(values).max())
        if peak > 0.0:
            shares.append(float(bound.max()) / peak)
    return max(shares, default=0.0)
