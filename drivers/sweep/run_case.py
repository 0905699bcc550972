"""Run one case: the response by the case's rule, and its error against the reference solution."""

from __future__ import annotations

import math
import time
import traceback
from dataclasses import asdict, dataclass
from typing import Any

from drivers.difference import largest_difference
from drivers.point import drive
from drivers.reference import Reference, solve
from drivers.sweep.plan import Case, Plan
from matlib.errors import CardproofError
from matlib.material import Material

__all__ = ["CaseRunner", "Outcome"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What one case gave; `error` says why where it gave nothing.

    Parameters
    ----------
    peak_stress, end_stress : float or None
        Largest stress component on the path, and the largest at its end with its sign [Pa].
    relative_error, reference_bound : float or None
        Largest difference from the reference solution, and that solution's half-width, as fractions of the peak.
    estimated : bool or None
        Whether that half-width is an estimate.
    increments : int or None
    seconds : float
        Time that the case took, with the reference solution where it was the first to need it.
    error : str or None
    """

    peak_stress: float | None = None
    end_stress: float | None = None
    relative_error: float | None = None
    reference_bound: float | None = None
    estimated: bool | None = None
    increments: int | None = None
    seconds: float = 0.0
    error: str | None = None

    def row(self) -> dict[str, Any]:
        """As a row of the result table."""
        return asdict(self)


class CaseRunner:
    """Runs cases of a plan one after the other.

    Parameters
    ----------
    plan : Plan

    Notes
    -----
    The material and the reference solution used last are kept: cases that share them follow each other, and the reference
    solution takes most of the time.
    """

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        self._material: tuple[tuple[str, int], Material] | None = None
        self._reference: tuple[tuple[str, int, str], Reference] | None = None

    def run(self, case: Case) -> Outcome:
        """Outcome of a case; whatever goes wrong becomes part of it, and never ends a sweep."""
        started = time.perf_counter()
        try:
            found = self._response(case)
        except CardproofError as error:
            found = {"error": " ".join(str(error).split())}
        except Exception as error:  # recorded with its place; the rest of the sweep goes on
            place = traceback.extract_tb(error.__traceback__)[-1]
            text = f"{type(error).__name__}: {error} (in {place.name}, line {place.lineno})"
            found = {"error": " ".join(text.split())}
        return Outcome(**found, seconds=time.perf_counter() - started)

    def _response(self, case: Case) -> dict[str, Any]:
        path = self.plan.path(case)
        history = drive(case.rule.routine(self._material_of(case)), path)
        reference = self._reference_of(case)
        difference = largest_difference(reference.history, history)
        end = history.stress_components[-1]
        if not all(map(math.isfinite, (history.peak_stress, difference.relative, reference.relative_bound))):
            raise ArithmeticError("the response is not finite")
        return {
            "peak_stress": history.peak_stress,
            "end_stress": float(end[abs(end).argmax()]),
            "relative_error": difference.relative,
            "reference_bound": reference.relative_bound,
            "estimated": reference.estimated,
            "increments": path.increment_count,
        }

    def _material_of(self, case: Case) -> Material:
        wanted = (case.card, case.sample)
        if self._material is None or self._material[0] != wanted:
            self._material = (wanted, self.plan.material(*wanted))
        return self._material[1]

    def _reference_of(self, case: Case) -> Reference:
        if self._reference is None or self._reference[0] != case.problem:
            solution = solve(self._material_of(case), self.plan.path(case), accuracy=self.plan.accuracy)
            self._reference = (case.problem, solution)
        return self._reference[1]
