"""A routine in Python, loaded from ``module:object`` inside a process of its own.

The object has `memory_size` and ``update(increment, memory)``, which returns stress, tangent and the new memory (three values, or an
object with these names), six-vectors in Mandel form; see `matlib.routine`. Where the object has no `update`, or is a class, it is called with
the list of constants and makes the routine.
"""

from __future__ import annotations

import importlib
import sys
import traceback
from typing import Any

import numpy as np

from drivers.foreign.arena import Arena, LocalFailureError, increment_of
from drivers.foreign.local import FaultyRoutineError, LocalRoutine
from matlib.arrays import FloatArray

__all__ = ["PythonRoutine", "load"]

MOST_MEMORY = 10_000_000


def load(reference: str, folder: str, constants: list[float]) -> tuple[Any, int]:
    """Import, and make, a routine.

    Parameters
    ----------
    reference : str
        ``module:object``.
    folder : str
        Where modules are looked for first.
    constants : list of float

    Returns
    -------
    routine : object
    memory_size : int

    Raises
    ------
    FaultyRoutineError
        If any of that fails.
    """
    module_name, _, path = reference.partition(":")
    sys.path.insert(0, folder)
    try:
        found: Any = importlib.import_module(module_name)
        for part in path.split("."):
            found = getattr(found, part)
    except BaseException as error:
        raise FaultyRoutineError("python", described(error), "module:object that can be imported") from None
    try:
        if isinstance(found, type) or getattr(found, "update", None) is None:
            found = found(constants)
        size = found.memory_size
        update = found.update
    except BaseException as error:
        expected = (
            "an object with memory_size and update(increment, memory), or a callable that makes one of the constants"
        )
        raise FaultyRoutineError("python", described(error), expected) from None
    if not callable(update):
        raise FaultyRoutineError("python", f"update = {update!r:.60}", "a method update(increment, memory)")
    if isinstance(size, bool) or not isinstance(size, int | np.integer) or not 0 <= size <= MOST_MEMORY:
        raise FaultyRoutineError("python", f"memory_size = {size!r:.60}", f"a whole number from 0 to {MOST_MEMORY}")
    return found, int(size)


def described(error: BaseException) -> str:
    """An exception of foreign code in one line: its type, its message, and where it was raised."""
    try:
        message = " ".join(str(error).split())
    except Exception:
        message = "no message"
    frames = traceback.extract_tb(error.__traceback__)
    where = f" ({frames[-1].filename.rpartition('/')[2]}, line {frames[-1].lineno})" if len(frames) > 1 else ""
    return f"{type(error).__name__}: {message[:300]}{where}"


class PythonRoutine(LocalRoutine):
    """An object in Python and an arena."""

    def __init__(self, routine: Any, memory_size: int, arena: Arena) -> None:
        self._routine = routine
        self._memory_size = memory_size
        self.arena = arena
        arena.guard()

    @property
    def memory_size(self) -> int:
        """As the object said when it was loaded."""
        return self._memory_size

    def call(self, n: int) -> None:
        """Take the first `n` increments of the arena, each answer checked before the next call."""
        arena = self.arena
        arena.prepare(n)
        for k in range(n):
            arena.head[0] += 1
            self._call_one(k)

    def _call_one(self, k: int) -> None:
        arena = self.arena
        increment, memory = increment_of(arena.increments[k]), arena.memory.body[k].copy()
        try:
            answer = self._routine.update(increment, memory)
        except BaseException as error:
            raise LocalFailureError(k, "exception", described(error)) from None
        if not (
            np.array_equal(np.concatenate(increment.strain), arena.increments[k, 4:16])
            and np.array_equal(memory, arena.memory.body[k])
        ):
            which = "`memory`" if not np.array_equal(memory, arena.memory.body[k]) else "`increment.strain`"
            raise LocalFailureError(k, "input-changed", f"wrote into its input {which}")
        parts = self._parts(k, answer)
        for region, row, values in (
            (arena.stress, k, parts[0]),
            (arena.tangent, k, parts[1].ravel()),
            (arena.memory, k + 1, parts[2]),
        ):
            region.body[row] = values
            complaint = region.complaint_of_numbers(row, row + 1)
            if complaint is not None:
                raise LocalFailureError(k, "not-finite", complaint[1])

    def _parts(self, k: int, answer: Any) -> list[FloatArray]:
        """Stress, tangent and memory of an answer, their shapes checked."""
        try:
            if isinstance(answer, tuple | list):
                stress, tangent, memory = answer
            else:
                stress, tangent, memory = answer.stress, answer.tangent, answer.memory
        except (ValueError, AttributeError):
            detail = f"update returned {type(answer).__name__}, not stress, tangent and memory"
            raise LocalFailureError(k, "wrong-shape", detail) from None
        parts = []
        for name, values, shape in (
            ("stress", stress, (6,)),
            ("tangent", tangent, (6, 6)),
            ("memory", memory, (self._memory_size,)),
        ):
            try:
                array = np.array(values, dtype=np.float64)
            except (TypeError, ValueError):
                detail = f"{name} is a {type(values).__name__}, not numbers"
                raise LocalFailureError(k, "wrong-shape", detail) from None
            if array.shape != shape:
                raise LocalFailureError(k, "wrong-shape", f"{name} has shape {array.shape}, not {shape}")
            parts.append(array)
        return parts

    def stresses(self, n: int) -> FloatArray:
        """As the routine returned them."""
        return self.arena.stress.body[:n].copy()

    def tangent(self) -> FloatArray:
        """As the routine returned it."""
        return self.arena.tangent.body[0].reshape(6, 6).copy()
