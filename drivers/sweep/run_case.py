"""Run one case: the response by the case's rule, and its error against the reference solution."""

from __future__ import annotations

import math
import time
import traceback
from dataclasses import asdict, dataclass
from typing import Any

from drivers.difference import largest_difference
from drivers.path import Path
from drivers.point import drive
from drivers.reference import solve
from drivers.studies.trial import Rule
from matlib.errors import CardproofError
from matlib.material import Material

__all__ = ["Outcome", "run_case"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What one case gave; `error` says why where it gave nothing."""

    key: str
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


def run_case(key: str, material: Material, path: Path, rule: Rule) -> Outcome:
    """Run a case; whatever goes wrong becomes part of its outcome, and never ends a sweep."""
    started = time.perf_counter()
    try:
        history = drive(rule.routine(material), path)
        reference = solve(material, path)
        difference = largest_difference(reference.history, history)
        end = history.stress_components[-1]
        values = (history.peak_stress, difference.relative, reference.relative_bound)
        if not all(math.isfinite(value) for value in values):
            raise ArithmeticError("the response is not finite")
        return Outcome(
            key=key,
            peak_stress=history.peak_stress,
            end_stress=float(end[abs(end).argmax()]),
            relative_error=difference.relative,
            reference_bound=reference.relative_bound,
            estimated=reference.estimated,
            increments=path.increment_count,
            seconds=time.perf_counter() - started,
        )
    except CardproofError as error:
        return Outcome(key=key, seconds=time.perf_counter() - started, error=" ".join(str(error).split()))
    except Exception as error:  # recorded with its place; the rest of the sweep goes on
        place = traceback.extract_tb(error.__traceback__)[-1]
        text = f"{type(error).__name__}: {error} (in {place.name}, line {place.lineno})"
        return Outcome(key=key, seconds=time.perf_counter() - started, error=" ".join(text.split()))
