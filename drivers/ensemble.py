"""Drive many materials along one path at once."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from drivers.history import History
from drivers.path import Path, Segment, segment_blocks
from drivers.point import ResponseError, kept_rows
from drivers.processors import processors
from matlib.arrays import FloatArray
from matlib.ensemble import Ensemble, Room
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.recursion import Recursion
from matlib.routine import Block
from matlib.shift.reduced_time import ShiftRule
from matlib.tensors import stress_from_mandel

__all__ = ["EnsembleHistory", "run_ensemble"]

GROUP = 128
"""Members taken along the path together at most; bounds memory, with `GROUP_BLOCK`. Many at once keep the interpreter's lock free."""

GROUPS_A_THREAD = 4

MEMBERS_A_THREAD = 250
"""Fewer are not worth another thread: what is not compiled takes turns, and small groups spend most of their time there."""

GROUP_BLOCK = 512
"""Increments of a piece of a block; no block has twice as many."""

ABREAST = 16
"""Rows that are looked through side by side."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class EnsembleHistory:
    """The responses of many materials at the rows that were kept; the first is the start.

    Parameters
    ----------
    segment : tuple of str, length rows
    time, temperature : ndarray, shape (rows,)
        [s], [K].
    reduced_time : ndarray, shape (members, rows)
        [s at the T_ref of each].
    strain, stress : ndarray, shape (members, rows, 6)
        Mandel form [-], [Pa].
    peak_stress : ndarray, shape (members,)
        Largest stress component over every increment end, kept or not [Pa].
    ends : ndarray of bool, shape (rows,)
        Which rows end a segment.
    """

    segment: tuple[str, ...]
    time: FloatArray
    temperature: FloatArray
    reduced_time: FloatArray
    strain: FloatArray
    stress: FloatArray
    peak_stress: FloatArray
    ends: np.ndarray

    def __len__(self) -> int:
        return self.stress.shape[0]

    def member(self, index: int) -> History:
        """One of them, as `drive` gives it."""
        return History(
            segment=self.segment,
            time=self.time,
            temperature=self.temperature,
            reduced_time=self.reduced_time[index],
            strain=self.strain[index],
            stress=self.stress[index],
            peak_stress=float(self.peak_stress[index]),
            ends=self.ends,
        )


class _Rows(NamedTuple):
    """What is kept of one block, of a group of members."""

    label: str
    time: FloatArray
    temperature: FloatArray
    ends: np.ndarray
    reduced_time: FloatArray
    strain: FloatArray
    stress: FloatArray
    peak: FloatArray


def run_ensemble(
    materials: Sequence[Material],
    path: Path,
    *,
    keep: str | int = "ends",
    recursion: Recursion | None = None,
    shift_rule: ShiftRule | None = None,
    threads: int | None = None,
) -> EnsembleHistory:
    """Responses of many materials to one path.

    Parameters
    ----------
    materials : sequence of Material
        Many cards, or one whose constants were sampled.
    path : Path
    keep : {"ends", "all"} or int, optional
        Which increment ends are kept, as in `drive`.
    recursion, shift_rule : optional
        As in `Ensemble`.
    threads : int, optional
        If left out, as many as there are processors to run on, and fewer for few members.

    Returns
    -------
    EnsembleHistory

    Raises
    ------
    ParameterError
        If there is no material, or an argument is not as above.
    ShiftRangeError
        If the path leads the shift law of a member where it has no answer.
    ResponseError
        If a stress or a strain of a member is not finite.
    """
    if not (keep in ("all", "ends") or (isinstance(keep, int) and keep >= 1)):
        raise ParameterError("keep", '"all", "ends" or an integer >= 1', keep)
    if threads is not None and threads < 1:
        raise ParameterError("threads", ">= 1", threads)
    if not materials:
        raise ParameterError("materials", "at least one", "none")
    threads = threads or max(1, min(processors(), len(materials) // MEMBERS_A_THREAD))
    size = min(GROUP, -(-len(materials) // (GROUPS_A_THREAD * threads)))

    def take(first: int) -> list[_Rows]:
        group = Ensemble(materials[first : first + size], recursion=recursion, shift_rule=shift_rule)
        return list(_march(group, path, keep, first))

    with ThreadPoolExecutor(max_workers=threads) as pool:
        taken = list(pool.map(take, range(0, len(materials), size)))
    common = taken[0]

    def joined(name: str) -> FloatArray:
        return np.concatenate([np.concatenate([getattr(rows, name) for rows in group], axis=1) for group in taken])

    return EnsembleHistory(
        segment=tuple(rows.label for rows in common for _ in range(rows.time.size)),
        time=np.concatenate([rows.time for rows in common]),
        temperature=np.concatenate([rows.temperature for rows in common]),
        reduced_time=joined("reduced_time"),
        strain=joined("strain"),
        stress=joined("stress"),
        peak_stress=np.concatenate([np.max([rows.peak for rows in group], axis=0) for group in taken]),
        ends=np.concatenate([rows.ends for rows in common]),
    )


def _march(group: Ensemble, path: Path, keep: str | int, first: int) -> Iterator[_Rows]:
    """Take a group, whose first member is number `first`, along the path."""
    members, state = len(group), group.start()
    strain, stress, xi = np.zeros((members, 6)), np.zeros((members, 6)), np.zeros((members, 1))
    time, temperature, before = 0.0, path.start_temperature, 0
    zeros, room = np.zeros((members, 1, 6)), Room.of(members, 2 * GROUP_BLOCK)
    yield _Rows(
        label="start",
        time=np.zeros(1),
        temperature=np.array([temperature]),
        ends=np.ones(1, dtype=np.bool_),
        reduced_time=xi,
        strain=zeros,
        stress=zeros,
        peak=np.zeros(members),
    )
    for _, label, segment in path.unrolled():
        values = np.where(segment.stress_controlled, stress, strain)
        done = 0
        for block, targets in _blocks(segment, time, temperature, values):
            done += block.duration.size
            T = block.temperature
            dxi = group.reduced_time(block.duration, T[:-1], T[1:])
            strains, stresses = group.run(dxi, T, targets, block.stress_controlled, state, room)
            peak = _largest(stresses)
            # a strain that is not finite stays so, and no stress on the way was finite
            if not (np.isfinite(peak).all() and np.isfinite(strains[:, -1]).all()):
                _require_finite(label, block, strains, stresses, first)
            last = done == segment.increment_count
            mask = kept_rows(block.duration.size, before, keep, ends_segment=last)
            before += mask.size
            ends = np.zeros(mask.size, dtype=np.bool_)
            ends[-1] = last
            clock = xi + np.cumsum(dxi, axis=1)
            yield _Rows(
                label=label,
                time=block.time_end[mask],
                temperature=T[1:][mask],
                ends=ends[mask],
                reduced_time=clock[:, mask],
                strain=strains[:, mask],
                stress=stresses[:, mask],
                peak=stress_from_mandel(peak).max(axis=1),
            )
            strain, stress, xi = strains[:, -1].copy(), stresses[:, -1].copy(), clock[:, -1:]
            temperature, time = float(T[-1]), float(block.time_end[-1])


def _blocks(
    segment: Segment, time: float, temperature: float, values: FloatArray
) -> Iterator[tuple[Block, FloatArray]]:
    """Blocks of a segment and the targets of each member, shape (1 or members, n, 6).

    Targets are linear in what a member starts from: found from a start at nothing and a start at one.
    """
    if np.all(values == values[0]):
        for block in segment_blocks(segment, time, temperature, values[0], GROUP_BLOCK):
            yield block, block.targets[np.newaxis]
        return
    nothing = segment_blocks(segment, time, temperature, np.zeros(6), GROUP_BLOCK)
    one = segment_blocks(segment, time, temperature, np.ones(6), GROUP_BLOCK)
    for block, other in zip(nothing, one, strict=True):
        part = other.targets - block.targets
        yield block, block.targets + part * values[:, np.newaxis, :]


def _largest(stresses: FloatArray) -> FloatArray:
    """Largest magnitude of each member and component, shape (members, 6); many rows at a time, which is faster."""
    members, n, _ = stresses.shape
    whole = n // ABREAST * ABREAST
    parts = stresses[:, :whole].reshape(members, -1, 6 * ABREAST), stresses[:, whole:]
    largest = [np.maximum(part.max(axis=1, initial=0.0), -part.min(axis=1, initial=0.0)) for part in parts]
    return np.maximum(largest[0].reshape(members, ABREAST, 6).max(axis=1), largest[1])


def _require_finite(label: str, block: Block, strain: FloatArray, stress: FloatArray, first: int) -> None:
    wrong = ~(np.isfinite(stress).all(axis=2) & np.isfinite(strain).all(axis=2))
    if wrong.any():
        member, k = np.argwhere(wrong)[0]
        raise ResponseError(f"{label} of member {first + int(member)}", float(block.time[int(k)]))
