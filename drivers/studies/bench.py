"""The paths of a baseline as a bench to run materials on, quickly, and to tell their responses apart."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from drivers.baseline_paths import RecordedPath
from drivers.difference import largest_difference
from drivers.ensemble import EnsembleHistory, run_ensemble
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.studies.parts import Split
from matlib.errors import CardproofError
from matlib.material import Material
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["Bench", "Change"]

FINER = 4


@dataclass(frozen=True, slots=True, kw_only=True)
class Change:
    """How far two responses are apart on the path where that is most, in units of its tolerance.

    Parameters
    ----------
    ratio : float
        Difference in units of the tolerance; infinite where only one of the two has a response.
    relative : float or None
        As a fraction of the path's peak; None where only one of the two has a response.
    path : str
        Name of that path.
    """

    ratio: float
    relative: float | None
    path: str


class Bench:
    """The paths of a baseline, to run materials on and to tell their responses apart.

    Parameters
    ----------
    paths : sequence of RecordedPath
    finer : int, optional
        Increments between neighbouring probe points.

    Notes
    -----
    Runs use the built-in update with the same increments for all. What the increments do to
    one run they do to the other, so that a difference of two runs is far more accurate than either.
    """

    def __init__(self, paths: Sequence[RecordedPath], *, finer: int = FINER) -> None:
        self.paths = tuple(paths)
        self._runs = tuple(_finer(recorded, finer) for recorded in paths)

    @property
    def temperatures(self) -> tuple[float, float]:
        """Lowest and highest temperature of all paths [K]."""
        ranges = [recorded.path.temperature_range for recorded in self.paths]
        return min(low for low, _ in ranges), max(high for _, high in ranges)

    def run(self, material: Material) -> tuple[History | None, ...]:
        """Response to every path; None where there is none."""
        routine = LinearViscoelastic(material=material)
        responses: list[History | None] = []
        for path in self._runs:
            try:
                responses.append(drive(routine, path))
            except (CardproofError, ArithmeticError):
                responses.append(None)
        return tuple(responses)

    def run_many(
        self, materials: Sequence[Material], done: Callable[[int], None]
    ) -> tuple[EnsembleHistory, ...] | None:
        """Responses of many materials to every path, side by side; None where one of them has none.

        Parameters
        ----------
        materials : sequence of Material
        done : callable
            Called after each path with the number of paths run so far.
        """
        responses = []
        try:
            for path in self._runs:
                responses.append(run_ensemble(materials, path, keep="all"))
                done(len(responses))
        except (CardproofError, ArithmeticError):
            return None
        return tuple(responses)

    def change(self, first: Sequence[History | None], second: Sequence[History | None]) -> Change:
        """Largest difference of the second responses from the first."""
        worst = Change(ratio=0.0, relative=0.0, path=self.paths[0].path.name)
        for recorded, one, other in zip(self.paths, first, second, strict=True):
            if one is None and other is None:
                continue
            if one is None or other is None:
                return Change(ratio=math.inf, relative=None, path=recorded.path.name)
            relative = largest_difference(one, other).relative
            if relative / recorded.tolerance > worst.ratio:
                worst = Change(ratio=relative / recorded.tolerance, relative=relative, path=recorded.path.name)
        return worst

    def effect(self, reference: Sequence[History | None], parts: Split) -> Change:
        """Difference of a put-together material's responses from some others; infinite where it is no material."""
        try:
            material = parts.material()
        except CardproofError:
            return Change(ratio=math.inf, relative=None, path=self.paths[0].path.name)
        return self.change(reference, self.run(material))


def _finer(recorded: RecordedPath, finer: int) -> Path:
    counts = tuple(
        finer * count if segment.durations.size == 1 else count
        for segment, count in zip(recorded.path.segments, recorded.increments, strict=True)
    )
    return recorded.path.with_increments(counts)
