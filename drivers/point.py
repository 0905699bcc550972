"""Drive a routine along a path at one material point: the one loop."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from drivers.history import History
from drivers.path import Path, segment_blocks
from matlib.arrays import BoolArray, FloatArray
from matlib.errors import CardproofError, ParameterError
from matlib.routine import Block, BlockResponse, BlockRoutine, Increment, Routine
from matlib.tensors import stress_from_mandel

__all__ = ["ControlError", "ResponseError", "drive", "kept_rows", "march", "take_stepwise"]

NEWTON_LIMIT = 25
NEWTON_TOLERANCE = 1e-12
"""Largest residual of a controlled stress, as a fraction of the stress that the tangent and the strains stand for."""


class ControlError(CardproofError, ArithmeticError):
    """Mixed control did not converge: the routine's tangent does not lead to the stress that is asked for."""

    def __init__(self, time: float, residual: float) -> None:
        super().__init__(time, residual)
        self.time = time
        self.residual = residual

    def __str__(self) -> str:
        return (
            f"stress control did not converge in the increment that starts at {self.time:g} s: "
            f"{self.residual:g} Pa are left after {NEWTON_LIMIT} iterations; look at the routine's tangent"
        )


class ResponseError(CardproofError, ArithmeticError):
    """A routine answered an increment with a stress or a strain that is not finite."""

    def __init__(self, segment: str, time: float) -> None:
        super().__init__(segment, time)
        self.segment = segment
        self.time = time

    def __str__(self) -> str:
        return (
            f"no finite response in segment {self.segment!r}, in the increment that starts at {self.time:g} s: "
            "the stiffness there is zero, or stress or strain grow without bound"
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Rows:
    """All increment ends of one block."""

    label: str
    time: FloatArray
    temperature: FloatArray
    reduced_time: FloatArray | None
    response: BlockResponse
    ends_segment: bool


def take_stepwise(routine: Routine, block: Block, strain: FloatArray, memory: FloatArray) -> BlockResponse:
    """Take the increments of a block one by one through `routine.update`.

    Parameters
    ----------
    routine : Routine
    block : Block
    strain : ndarray, shape (6,)
        Strain at the start (Mandel).
    memory : ndarray, shape (memory_size,)

    Returns
    -------
    BlockResponse

    Raises
    ------
    ControlError
        If free components cannot be found.

    Notes
    -----
    Free components by Newton's method with the routine's tangent, and at least one correction, which is all that a
    linear routine needs.
    """
    free = block.stress_controlled
    strains, stresses = np.empty_like(block.targets), np.empty_like(block.targets)
    extent = float(np.abs(strain).max())  # largest strain so far: what is remembered of it may cancel to rounding only
    for k, target in enumerate(block.targets):
        strain_end = np.where(free, strain, target)
        for taken in range(NEWTON_LIMIT):
            increment = Increment(
                time=float(block.time[k]),
                duration=float(block.duration[k]),
                temperature=(float(block.temperature[k]), float(block.temperature[k + 1])),
                strain=(strain, strain_end),
            )
            update = routine.update(increment, memory)
            if not free.any():
                break
            residual = target[free] - update.stress[free]
            if not np.isfinite(residual).all():
                break
            extent = max(extent, float(np.abs(strain_end).max()))
            scale = np.abs(update.tangent).max() * extent + np.abs(update.stress).max()
            if np.abs(residual).max() <= (NEWTON_TOLERANCE if taken else 0.0) * scale:
                break
            strain_end = strain_end.copy()
            try:
                strain_end[free] += np.linalg.solve(update.tangent[np.ix_(free, free)], residual)
            except np.linalg.LinAlgError:
                raise ControlError(float(block.time[k]), float(np.abs(residual).max())) from None
        else:
            raise ControlError(float(block.time[k]), float(np.abs(residual).max()))
        strain, memory = strain_end, update.memory
        strains[k], stresses[k] = strain_end, update.stress
    return BlockResponse(strains, stresses, memory)


def march(routine: Routine, path: Path, *, stepwise: bool = False) -> Iterator[_Rows]:
    """Run `routine` along `path`, a block of increments at a time.

    Parameters
    ----------
    routine : Routine
    path : Path
    stepwise : bool, optional
        Leave the routine's fast lane unused.

    Yields
    ------
    rows
        The increment ends of one block; memory use does not grow with the path.

    Raises
    ------
    ResponseError
        If a stress or a strain is not finite.
    """
    strain, stress, memory = np.zeros(6), np.zeros(6), np.zeros(routine.memory_size)
    time, temperature, xi = 0.0, path.start_temperature, 0.0
    for _, label, segment in path.unrolled():
        values = np.where(segment.stress_controlled, stress, strain)
        done = 0
        for block in segment_blocks(segment, time, temperature, values):
            if isinstance(routine, BlockRoutine) and not stepwise:
                response = routine.run(block, strain, memory)
            else:
                response = take_stepwise(routine, block, strain, memory)
            wrong = ~(np.isfinite(response.stress).all(axis=1) & np.isfinite(response.strain).all(axis=1))
            if wrong.any():
                raise ResponseError(label, float(block.time[int(wrong.argmax())]))
            T = block.temperature
            dxi = response.reduced_time
            if dxi is None:
                dxi = routine.reduced_time(block.duration, T[:-1], T[1:])
            clock = None if dxi is None else xi + np.cumsum(dxi)
            done += block.duration.size
            yield _Rows(
                label=label,
                time=block.time_end,
                temperature=T[1:],
                reduced_time=clock,
                response=response,
                ends_segment=done == segment.increment_count,
            )
            strain, stress, memory = response.strain[-1], response.stress[-1], response.memory
            xi = xi if clock is None else float(clock[-1])
            temperature, time = float(T[-1]), float(block.time_end[-1])


def kept_rows(count: int, before: int, keep: str | int, *, ends_segment: bool) -> BoolArray:
    """Which of `count` increment ends a history keeps.

    Parameters
    ----------
    count : int
        Increments of a block.
    before : int
        Increments of the path before it.
    keep : {"all", "ends"} or int
        As in `drive`.
    ends_segment : bool
        Whether the block is the last of its segment.

    Examples
    --------
    >>> kept_rows(4, 1, 3, ends_segment=True).tolist()
    [False, True, False, True]
    """
    if keep == "all":
        return np.ones(count, dtype=np.bool_)
    number = before + np.arange(1, count + 1)
    mask = number % keep == 0 if isinstance(keep, int) else np.zeros(count, dtype=np.bool_)
    mask[-1] |= ends_segment
    return mask


def drive(
    routine: Routine,
    path: Path,
    *,
    keep: str | int = "all",
    stepwise: bool = False,
    progress: Callable[[int], None] | None = None,
) -> History:
    """Response of `routine` to `path`.

    Parameters
    ----------
    routine : Routine
        Ours or another.
    path : Path
    keep : {"all", "ends"} or int, optional
        Which increment ends the history keeps: every one, the segment ends, or every n-th and the segment ends. Memory
        grows with what is kept, not with the path.
    stepwise : bool, optional
        Take increments one by one, the routine's fast lane unused.
    progress : callable, optional
        Called with the number of increments done since the last call.

    Returns
    -------
    History

    Raises
    ------
    ShiftRangeError
        If the path leads the shift law where it has no answer.
    ControlError
        If a routine's tangent does not lead to the stress that a component must follow.
    ResponseError
        If a stress or a strain is not finite.
    """
    if not (keep in ("all", "ends") or (isinstance(keep, int) and keep >= 1)):
        raise ParameterError("keep", '"all", "ends" or an integer >= 1', keep)
    labels, peak, before = ["start"], 0.0, 0
    times, temperatures = [np.zeros(1)], [np.array([path.start_temperature])]
    clocks: list[FloatArray] | None = [np.zeros(1)]
    strains, stresses = [np.zeros((1, 6))], [np.zeros((1, 6))]
    ends = [np.ones(1, dtype=np.bool_)]
    for rows in march(routine, path, stepwise=stepwise):
        mask = kept_rows(rows.time.size, before, keep, ends_segment=rows.ends_segment)
        before += mask.size
        peak = max(peak, float(np.abs(stress_from_mandel(rows.response.stress)).max()))
        if progress is not None:
            progress(mask.size)
        if not mask.any():  # empty arrays, one a block, would grow with the path
            continue
        last = np.zeros(mask.size, dtype=np.bool_)
        last[-1] = rows.ends_segment
        ends.append(last[mask])
        labels += [rows.label] * int(np.count_nonzero(mask))
        times.append(rows.time[mask])
        temperatures.append(rows.temperature[mask])
        if rows.reduced_time is None or clocks is None:
            clocks = None
        else:
            clocks.append(rows.reduced_time[mask])
        strains.append(rows.response.strain[mask])
        stresses.append(rows.response.stress[mask])
    return History(
        segment=tuple(labels),
        time=np.concatenate(times),
        temperature=np.concatenate(temperatures),
        reduced_time=None if clocks is None else np.concatenate(clocks),
        strain=np.concatenate(strains),
        stress=np.concatenate(stresses),
        peak_stress=peak,
        ends=np.concatenate(ends),
    )
