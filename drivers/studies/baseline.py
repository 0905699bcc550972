"""Record an accepted behaviour, and hold a card against it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.baseline_file import Baseline
from drivers.baseline_paths import RecordedPath
from drivers.difference import Difference, largest_difference
from drivers.history import History
from drivers.path import Path, Segment
from drivers.reference import DEFAULT_ACCURACY, Reference, solve
from matlib.arrays import FloatArray
from matlib.errors import CardproofError, Fault, FaultyInputError, ParameterError
from matlib.material import Material

__all__ = ["PathVerdict", "Verification", "record_paths", "verify", "verify_path"]

ROWS = 32
"""Increments of each straight segment between which probe points are chosen, whatever the path's own."""

MOST_ROWS = 20_000
MOST_PIECES = 200_000
MOST_PROBES = 400
"""Probe points of a path at most: the ends of segments first, and always the rows of the largest stress and strain."""

TIGHTER, TIGHTEST = 0.02, 1e-10
SHARE_OF_TOLERANCE = 0.25
"""The part of a tolerance that the bound of a recorded response may take; no card could be judged with more."""

SAME_TIME = 1e-9
"""Relative; far above the rounding of a sum of durations, far below any increment."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PathVerdict:
    """A card on one path of a baseline.

    Parameters
    ----------
    recorded : RecordedPath
    difference : Difference or None
        Where the response differs most from the recorded one; None where the card has no response.
    bound : float
        Half-width on `difference.relative`, of both reference solutions together.
    estimated : bool
        Whether that half-width is an estimate.
    now : History or None
        Response at the probe points.
    reason : str
        Why there is no response.
    """

    recorded: RecordedPath
    difference: Difference | None
    bound: float = 0.0
    estimated: bool = False
    now: History | None = None
    reason: str = ""

    @property
    def name(self) -> str:
        """That of the path."""
        return self.recorded.path.name

    @property
    def tolerance(self) -> float:
        """Largest accepted difference, as a fraction of the path's peak."""
        return self.recorded.tolerance

    @property
    def relative(self) -> float | None:
        """Largest difference as a fraction of the recorded peak, or None."""
        return None if self.difference is None else self.difference.relative

    @property
    def holds(self) -> bool:
        """Whether the difference is within the tolerance, the bound allowed for."""
        return self.difference is not None and self.difference.relative + self.bound <= self.tolerance

    @property
    def ratio(self) -> float:
        """Difference in units of the tolerance; infinite without a response."""
        return float("inf") if self.difference is None else self.difference.relative / self.tolerance


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Verification:
    """A card on all paths of a baseline."""

    paths: tuple[PathVerdict, ...]

    @property
    def holds(self) -> bool:
        """Whether every path holds."""
        return all(path.holds for path in self.paths)

    @property
    def worst(self) -> PathVerdict:
        """The path that has moved most in units of its tolerance; one without a response before all others."""
        return max(self.paths, key=lambda path: path.ratio)


def record_paths(
    material: Material,
    paths: Sequence[Path],
    tolerances: Sequence[float],
    *,
    progress: Callable[[int], None] | None = None,
) -> tuple[RecordedPath, ...]:
    """Responses to be accepted.

    Parameters
    ----------
    material : Material
    paths : sequence of Path
    tolerances : sequence of float
        One a path, ``> 0``, as a fraction of its peak stress (or of its peak strain, where strain is the response).
    progress : callable, optional
        Called with 1 after each path.

    Returns
    -------
    recorded : tuple of RecordedPath

    Raises
    ------
    FaultyInputError
        With every path that the material has no response to, or that is too long or known too poorly for its tolerance.
    """
    recorded, faults = [], []
    for number, (path, tolerance) in enumerate(zip(paths, tolerances, strict=True), start=1):
        try:
            recorded.append(_record(material, path, tolerance))
        except CardproofError as error:
            hint = "give paths that it answers with --path"
            faults.append(
                Fault(key=f"path {number}, {path.name!r}", found=str(error), expected="a response", hint=hint)
            )
        if progress is not None:
            progress(1)
    if faults:
        raise FaultyInputError(faults)
    return tuple(recorded)


def _record(material: Material, path: Path, tolerance: float) -> RecordedPath:
    increments = _increments(path)
    probed = path.with_increments(increments)
    accuracy = min(DEFAULT_ACCURACY, max(TIGHTEST, 0.1 * SHARE_OF_TOLERANCE * tolerance))
    solution = solve(material, probed, accuracy=accuracy)
    if solution.relative_bound > SHARE_OF_TOLERANCE * tolerance:
        least = solution.relative_bound / SHARE_OF_TOLERANCE
        raise ParameterError("tolerance", f">= {least:.2g}, four times the bound of the response", tolerance)
    rows = _probe_rows(solution.history)
    return RecordedPath(
        path=path,
        tolerance=float(tolerance),
        increments=increments,
        rows=tuple(rows.tolist()),
        response=solution.history.taken(rows),
        strain_bound=solution.strain_bound[rows],
        estimated=solution.estimated,
    )


def _increments(path: Path) -> tuple[int, ...]:
    """Increments of each distinct segment: enough to see the response, few enough to solve."""
    runs = sum(1 if isinstance(part, Segment) else part.repeat * len(part.segments) for part in path.parts)
    pieces = sum(
        part.durations.size
        if isinstance(part, Segment)
        else part.repeat * sum(segment.durations.size for segment in part.segments)
        for part in path.parts
    )
    if pieces > MOST_PIECES:
        raise ParameterError("path", f"of at most {MOST_PIECES} straight pieces, cycles counted", pieces)
    rows = min(ROWS, max(4, MOST_ROWS // runs))
    return tuple(rows if segment.durations.size == 1 else 1 for segment in path.segments)


def _probe_rows(history: History) -> NDArray[np.int64]:
    """Rows to keep: all of them where they are few, else the ends of segments, extremes, and evenly spread others."""
    count = len(history)
    if count <= MOST_PROBES:
        return np.arange(count)
    extremes = [
        np.abs(values).max(axis=1).argmax() for values in (history.stress_components, history.strain_components)
    ]
    labels = history.segment
    ends = np.array([k for k in range(count) if k == count - 1 or labels[k] != labels[k + 1]])
    half = MOST_PROBES // 2
    if ends.size > half:
        ends = ends[np.linspace(0, ends.size - 1, half).astype(np.int64)]
    spread = np.linspace(0, count - 1, half - 2).astype(np.int64)
    return np.unique(np.concatenate([ends, spread, np.array(extremes, dtype=np.int64)]))


def verify(material: Material, baseline: Baseline, *, progress: Callable[[int], None] | None = None) -> Verification:
    """Hold a material against an accepted behaviour.

    Parameters
    ----------
    material : Material
    baseline : Baseline
    progress : callable, optional
        Called with 1 after each path.

    Returns
    -------
    Verification
    """
    verdicts = []
    for recorded in baseline.paths:
        verdicts.append(verify_path(material, recorded))
        if progress is not None:
            progress(1)
    return Verification(paths=tuple(verdicts))


def verify_path(material: Material, recorded: RecordedPath) -> PathVerdict:
    """Hold a material against the accepted response to one path.

    Raises
    ------
    FaultyInputError
        If the path's probe points are not where they were when it was recorded.
    """
    accuracy = DEFAULT_ACCURACY
    while True:
        try:
            solution = solve(material, recorded.probe_path, accuracy=accuracy)
        except CardproofError as error:
            return PathVerdict(recorded=recorded, difference=None, reason=str(error))
        now = _at_probes(solution, recorded)
        difference = largest_difference(recorded.response, now)
        bound = _bound(solution, recorded)
        undecided = abs(difference.relative - recorded.tolerance) <= bound
        if not undecided or accuracy * TIGHTER < TIGHTEST:
            break
        accuracy *= TIGHTER
    estimated = recorded.estimated or solution.estimated
    return PathVerdict(recorded=recorded, difference=difference, bound=bound, estimated=estimated, now=now)


def _at_probes(solution: Reference, recorded: RecordedPath) -> History:
    rows, then = np.array(recorded.rows), recorded.response.time
    if rows.max() < len(solution.history):
        now = solution.history.taken(rows)
        if np.all(np.abs(now.time - then) <= SAME_TIME * then[-1]):
            return now
    found = "probe points at other times than this version of cardproof puts them"
    key = f"path {recorded.path.name!r}"
    raise FaultyInputError([Fault(key=key, found=found, expected="those of this version", hint="record again")])


def _bound(solution: Reference, recorded: RecordedPath) -> float:
    """Half-widths of both solutions at the probe points as a fraction of the recorded peak."""
    rows, then = np.array(recorded.rows), recorded.response
    assert solution.history.bound is not None
    assert then.bound is not None
    stress: FloatArray = solution.history.bound[rows] + then.bound
    strain: FloatArray = solution.strain_bound[rows] + recorded.strain_bound
    shares = [
        float(widths.max()) / float(np.abs(values).max())
        for widths, values in ((stress, then.stress_components), (strain, then.strain_components))
        if np.abs(values).max() > 0.0
    ]
    return max(shares, default=0.0)
