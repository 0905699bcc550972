"""Fewer rows of a long run to judge it on: those that follow the start of each piece, and some of all the others."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from drivers.path import Cycle, Path, Segment, fractions
from matlib.arrays import FloatArray

__all__ = ["Sample", "kept_ends", "sampled"]

FEWEST = 8
"""Increment ends of a piece that are kept at least, if it has as many."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Sample:
    """Some increment ends of a run.

    Parameters
    ----------
    path : Path
        The same load path; its increments end there.
    rows : ndarray of int
        Which rows of the run these are, the start included.
    """

    path: Path
    rows: np.ndarray


def kept_ends(count: int, budget: int) -> np.ndarray:
    """Numbers of the increment ends of a piece that are kept, ascending.

    An error that lasts a few increments comes after the start of a piece, where the load bends: half of what is kept thins out
    from there in even ratios, and the other half lies at even distances.

    Examples
    --------
    >>> kept_ends(4, 8).tolist(), kept_ends(100, 8).tolist()
    ([1, 2, 3, 4], [1, 5, 22, 25, 50, 75, 100])
    """
    if count <= budget:
        return np.arange(1, count + 1)
    half = budget // 2
    spread = np.concatenate([np.geomspace(1.0, count, half), np.linspace(0.0, count, half + 1)[1:]])
    return np.unique(np.round(spread).astype(np.int64))


def sampled(path: Path, budget: int) -> Sample | None:
    """Choose increment ends of a path.

    Parameters
    ----------
    path : Path
    budget : int
        How many, roughly, if the path has not more pieces.

    Returns
    -------
    Sample or None
        None where the kind of control changes, so that what a segment starts from depends on the response.
    """
    if len({segment.stress_controlled.tobytes() for segment in path.segments}) != 1:
        return None
    pieces = sum(segment.durations.size for _, _, segment in path.unrolled())
    each = max(FEWEST, budget // pieces)
    walk = _Walk(each=each, values=np.zeros(6), T=path.start_temperature, rows=[np.zeros(1, dtype=np.int64)])
    parts: list[Segment | Cycle] = []
    for part in path.parts:
        if isinstance(part, Segment):
            parts.append(walk.thinned(part))
            continue
        parts += [walk.thinned(segment) for segment in part.segments]
        if part.repeat > 1:  # from the second turn on, every turn starts where it ends
            parts.append(Cycle(repeat=part.repeat - 1, segments=tuple(walk.thinned(s) for s in part.segments)))
            walk.repeat(part.repeat - 2, part.segments)
    return Sample(path=replace(path, parts=tuple(parts)), rows=np.concatenate(walk.rows))


@dataclass(slots=True, kw_only=True, eq=False)
class _Walk:
    """Where a path has got to."""

    each: int
    values: FloatArray
    T: float
    rows: list[np.ndarray]
    done: int = 0

    def thinned(self, segment: Segment) -> Segment:
        """The segment cut at the ends that are kept, an increment for each of them."""
        kept = kept_ends(segment.increments, self.each)
        ends = fractions(segment.increments, segment.spacing, 0, segment.increments)[0][kept - 1]
        targets = np.where(segment.held, self.values, segment.targets)
        T_ends = segment.temperatures if segment.temperatures is not None else np.full(len(targets), self.T)
        durations, temperatures, values = [], [], []
        for duration, T, target in zip(segment.durations, T_ends, targets, strict=True):
            f = ends if duration > 0.0 else np.ones(1)
            durations.append(np.diff(f, prepend=0.0) * duration)
            temperatures.append(np.where(f < 1.0, self.T + f * (T - self.T), T))
            inner = f[:, np.newaxis]
            values.append(np.where(inner < 1.0, self.values + inner * (target - self.values), target))
            self.rows.append(self.done + (kept if duration > 0.0 else np.ones(1, dtype=np.int64)))
            self.done += segment.increments if duration > 0.0 else 1
            self.T, self.values = float(T), target
        return replace(
            segment,
            durations=np.concatenate(durations),
            temperatures=None if segment.temperatures is None else np.concatenate(temperatures),
            targets=np.concatenate(values),
            increments=1,
            spacing="even",
        )

    def repeat(self, times: int, segments: tuple[Segment, ...]) -> None:
        """Rows of further turns, as those of the turn just taken."""
        length = sum(segment.increment_count for segment in segments)
        pieces = sum(segment.durations.size for segment in segments)
        turn = self.rows[-pieces:]
        for k in range(1, times + 1):
            self.rows += [rows + k * length for rows in turn]
        self.done += times * length
