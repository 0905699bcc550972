"""One path of a baseline and its accepted response, as plain tables and back, to the last bit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from drivers.baseline_schema import CycleTable, PathTable, ResponseTable, SegmentTable
from drivers.history import History
from drivers.path import Cycle, Path, Segment, find_mode
from matlib.arrays import FloatArray, frozen
from matlib.errors import Fault, FaultyInputError
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS, mandel_from_strain, mandel_from_stress

__all__ = ["RecordedPath", "recorded_path", "recorded_table"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RecordedPath:
    """One path and the response to it that was accepted.

    Parameters
    ----------
    path : Path
    tolerance : float
        Largest accepted difference, as a fraction of the path's peak.
    increments : tuple of int
        Increments of each distinct segment between which the probe points were chosen.
    rows : tuple of int
        Which increment ends of that run are the probe points, the start being 0.
    response : History
        Reference solution at the probe points, its bound included.
    strain_bound : ndarray, shape (n,)
        Half-width on any strain component [-].
    estimated : bool
        Whether the half-widths are estimates.
    """

    path: Path
    tolerance: float
    increments: tuple[int, ...]
    rows: tuple[int, ...]
    response: History
    strain_bound: FloatArray
    estimated: bool

    @property
    def probe_path(self) -> Path:
        """The path with the increments between which the probe points were chosen."""
        return self.path.with_increments(self.increments)


def _segment_table(segment: Segment) -> dict[str, Any]:
    return {
        "label": segment.label,
        "durations": segment.durations.tolist(),
        "temperatures": None if segment.temperatures is None else segment.temperatures.tolist(),
        "targets": segment.targets.tolist(),
        "stress_controlled": segment.stress_controlled.tolist(),
        "held": segment.held.tolist(),
        "increments": int(segment.increments),
        "spacing": segment.spacing,
    }


def _path_table(path: Path) -> dict[str, Any]:
    parts = [
        _segment_table(part)
        if isinstance(part, Segment)
        else {"repeat": int(part.repeat), "segments": [_segment_table(segment) for segment in part.segments]}
        for part in path.parts
    ]
    return {
        "name": path.name,
        "mode": path.mode.name,
        "start_temperature": float(path.start_temperature),
        "parts": parts,
    }


def recorded_table(recorded: RecordedPath) -> dict[str, Any]:
    """One path of a baseline as plain tables."""
    history = recorded.response
    assert history.bound is not None
    return {
        "path": _path_table(recorded.path),
        "tolerance": recorded.tolerance,
        "response": {
            "increments": list(recorded.increments),
            "rows": list(recorded.rows),
            "segment": list(history.segment),
            "time": history.time.tolist(),
            "temperature": history.temperature.tolist(),
            "strain": _columns(STRAIN_COMPONENTS, history.strain_components),
            "stress": _columns(STRESS_COMPONENTS, history.stress_components),
            "strain_bound": recorded.strain_bound.tolist(),
            "stress_bound": history.bound.tolist(),
            "estimated": recorded.estimated,
        },
    }


def _columns(names: tuple[str, ...], values: FloatArray) -> dict[str, list[float]]:
    """Components that are not zero throughout."""
    return {name: values[:, c].tolist() for c, name in enumerate(names) if np.any(values[:, c] != 0.0)}


def _segment(table: SegmentTable) -> Segment:
    return Segment(
        label=table.label,
        durations=frozen(table.durations),
        temperatures=None if table.temperatures is None else frozen(table.temperatures),
        targets=frozen(table.targets),
        stress_controlled=np.array(table.stress_controlled),
        held=np.array(table.held),
        increments=table.increments,
        spacing=table.spacing,
    )


def _path(table: PathTable) -> Path:
    parts = tuple(
        Cycle(repeat=part.repeat, segments=tuple(_segment(segment) for segment in part.segments))
        if isinstance(part, CycleTable)
        else _segment(part)
        for part in table.parts
    )
    return Path(name=table.name, mode=find_mode(table.mode), start_temperature=table.start_temperature, parts=parts)


def recorded_path(path_table: PathTable, tolerance: float, response: ResponseTable) -> RecordedPath:
    """One path of a baseline from its checked tables.

    Raises
    ------
    FaultyInputError, ParameterError, UnknownNameError
        If they are no path and response.
    """
    count = len(response.rows)
    named = [*response.strain.values(), *response.stress.values()]
    columns = [response.time, response.temperature, response.strain_bound, response.stress_bound, *named]
    path = _path(path_table)
    if count == 0 or len(response.segment) != count or any(len(column) != count for column in columns):
        fault = Fault(key="paths.response", found="columns of different length", expected="one entry a probe point")
        raise FaultyInputError([fault])
    stress = _tensor(STRESS_COMPONENTS, response.stress, count)
    history = History(
        segment=tuple(response.segment),
        time=frozen(response.time),
        temperature=frozen(response.temperature),
        reduced_time=None,
        strain=mandel_from_strain(_tensor(STRAIN_COMPONENTS, response.strain, count)),
        stress=mandel_from_stress(stress),
        peak_stress=float(np.abs(stress).max()),
        bound=frozen(response.stress_bound),
    )
    return RecordedPath(
        path=path,
        tolerance=tolerance,
        increments=tuple(response.increments),
        rows=tuple(response.rows),
        response=history,
        strain_bound=frozen(response.strain_bound),
        estimated=response.estimated,
    )


def _tensor(names: tuple[str, ...], columns: Any, count: int) -> FloatArray:
    zero = [0.0] * count
    return np.stack([np.array(columns.get(name, zero)) for name in names], axis=1)
