"""How far two materials are apart on what a comparison can see: cheaply on closed forms, then on responses."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from drivers.difference import largest_difference
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from matlib.arrays import FloatArray
from matlib.errors import ShiftRangeError
from matlib.material import Material
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["Evidence", "Signature"]

TEMPERATURES, TIMES = 6, 14
DECADE = 1e-3
"""Worth of a decade of a_T where the response does not show it: it only breaks ties."""

ROWS = 32


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Signature:
    """Closed forms of a material over a window: moduli at times and temperatures, expansion, clock."""

    shear: FloatArray
    bulk: FloatArray
    expansion: float
    clock: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Evidence:
    """What two cards are judged on.

    Parameters
    ----------
    temperature, time : tuple of float
        Window [K], [s].
    paths : sequence of Path
    """

    temperature: tuple[float, float]
    time: tuple[float, float]
    paths: Sequence[Path]

    def signature(self, material: Material) -> Signature | None:
        """Closed forms of a material; None where its law has no answer in the window."""
        T = np.linspace(*self.temperature, TEMPERATURES)
        t = np.geomspace(*self.time, TIMES) if self.time[0] < self.time[1] else np.array([self.time[0]])
        try:
            ln_a = material.shift.ln_shift(T)
        except ShiftRangeError:
            return None
        with np.errstate(over="ignore", under="ignore"):
            xi = np.exp(np.minimum(np.log(t)[np.newaxis, :] - ln_a[:, np.newaxis], 600.0))
        times = material.shear.times if material.shear.times.size else material.bulk.times
        level = float(np.log(times).mean()) if times.size else 0.0
        return Signature(
            shear=material.shear.relaxation(xi),
            bulk=material.bulk.relaxation(xi),
            expansion=material.expansion,
            clock=(ln_a + level) / math.log(10.0),
        )

    def distance(self, truth: Signature | None, other: Signature | None) -> float:
        """Largest relative difference of two signatures, infinite where one has no answer."""
        if truth is None or other is None:
            return math.inf
        parts = [
            float(np.abs(truth.shear - other.shear).max()) / float(truth.shear.max()),
            float(np.abs(truth.bulk - other.bulk).max()) / float(truth.bulk.max()),
            DECADE * float(np.abs(truth.clock - other.clock).max()),
        ]
        if truth.expansion != 0.0:
            parts.append(abs(other.expansion / truth.expansion - 1.0))
        return max(parts)

    def responses(self, material: Material) -> list[History] | None:
        """Responses to every path; None where the law has no answer on one."""
        responses = []
        for path in self.paths:
            counts = tuple(min(ROWS, s.increments) if s.durations.size == 1 else 1 for s in path.segments)
            try:
                responses.append(drive(LinearViscoelastic(material=material), path.with_increments(counts)))
            except ShiftRangeError:
                return None
        return responses

    def remaining(self, truth: list[History] | None, other: list[History] | None) -> float:
        """Largest difference of responses, as a fraction of the peak; infinite where there is none."""
        if truth is None or other is None:
            return math.inf
        return max(largest_difference(a, b).relative for a, b in zip(truth, other, strict=True))
