"""A compiled routine, called through the C function of its shared library.

The C structure holds two times and no duration. ``time[0]`` is the start and ``time[1] = time[0] + duration``; where that sum
keeps less than twelve digits of the duration (a short increment late in a path), the two are 0 and the duration instead. A routine may
therefore rely on the difference of the two times, and on nothing else of them.
"""

from __future__ import annotations

import ctypes
import math
from collections.abc import Callable

import numpy as np

from drivers.foreign.arena import GUARD, Arena, LocalFailureError
from drivers.foreign.local import FaultyRoutineError, LocalRoutine
from matlib.arrays import FloatArray

__all__ = ["CompiledRoutine", "load", "steps_of"]

Function = Callable[..., int]

_ROOT2 = math.sqrt(2.0)
_ENGINEERING = np.array([1.0, 1.0, 1.0, _ROOT2, _ROOT2, _ROOT2])
_BOTH_STRAINS = np.tile(_ENGINEERING, 2)
_TANGENT = np.outer(_ENGINEERING, _ENGINEERING)
LOST = 1e-12
"""Share of a duration that the difference of the two times may lose."""


def load(library: str, symbol: str) -> Function:
    """The function of a shared library.

    Raises
    ------
    FaultyRoutineError
        If the library cannot be loaded or has no such function.
    """
    try:
        handle = ctypes.CDLL(library)
    except OSError as error:
        raise FaultyRoutineError("library", str(error), "a shared library that this machine can load") from None
    try:
        function = handle[symbol]
    except AttributeError:
        raise FaultyRoutineError("symbol", repr(symbol), "the name of a function that the library exports") from None
    function.restype = ctypes.c_int
    return function  # arguments are ctypes values, each of the right type


def steps_of(increments: FloatArray, steps: FloatArray) -> None:
    """Fill in what the C structure holds.

    Parameters
    ----------
    increments : ndarray, shape (n, 16)
        Time, duration, two temperatures, two strains (Mandel).
    steps : ndarray, shape (n, 16)
        Two times, two temperatures, two strains with engineering shear; overwritten.
    """
    np.multiply(increments[:, 4:], _BOTH_STRAINS, out=steps[:, 4:])
    steps[:, 2:4] = increments[:, 2:4]
    if len(steps) == 1:  # by hand: an update alone is taken often
        time, duration = float(increments[0, 0]), float(increments[0, 1])
        end = time + duration
        steps[0, :2] = (0.0, duration) if abs((end - time) - duration) > LOST * duration else (time, end)
        return
    times, durations = increments[:, 0], increments[:, 1]
    ends = times + durations
    lost = np.abs((ends - times) - durations) > LOST * durations
    steps[:, 0], steps[:, 1] = np.where(lost, 0.0, times), np.where(lost, durations, ends)


def _as_bytes(rows: FloatArray) -> list[memoryview]:
    """Each row as bytes that can be copied without numpy."""
    return [memoryview(row).cast("B") for row in rows]


class CompiledRoutine(LocalRoutine):
    """A C function, its constants and an arena; the arguments of every call are prepared once."""

    def __init__(self, function: Function, constants: FloatArray, memory_size: int, arena: Arena) -> None:
        self._function = function
        self._memory_size = memory_size
        margin = np.full(GUARD, np.nan)
        self._constants = np.concatenate([margin, constants, margin])
        self._constants_kept = self._constants.copy()
        self.arena = arena
        arena.guard()
        count, address = ctypes.c_int(constants.size), ctypes.c_void_p(self._constants[GUARD:].ctypes.data)
        size = ctypes.c_int(memory_size)

        def addresses(values: FloatArray) -> list[ctypes.c_void_p]:
            return [ctypes.c_void_p(values.ctypes.data + k * values.strides[0]) for k in range(len(values))]

        steps, given, memory = addresses(arena.steps), addresses(arena.given.body), addresses(arena.memory.body)
        stress, tangent = addresses(arena.stress.body), addresses(arena.tangent.body)
        self._calls = [
            (steps[k], count, address, size, given[k], memory[k + 1], stress[k], tangent[k]) for k in range(arena.rows)
        ]
        given_rows, memory_rows = _as_bytes(arena.given.body), _as_bytes(arena.memory.body)
        self._copies = list(zip(given_rows, memory_rows, strict=False))
        self._begun = ctypes.c_int64.from_address(arena.head.ctypes.data)

    @property
    def memory_size(self) -> int:
        """As the routine file says."""
        return self._memory_size

    def call(self, n: int) -> None:
        """Take the first `n` increments of the arena."""
        arena = self.arena
        steps_of(arena.increments[:n], arena.steps[:n])
        arena.prepare(n)
        done, code = self._loop(n)
        arena.check(done)
        if (
            self._constants.tobytes() != self._constants_kept.tobytes()
        ):  # which call did it is for the harness to find out
            raise LocalFailureError(0, "input-changed", "wrote into its input `constants`")
        if code:
            raise LocalFailureError(done, "code", f"it returned {code}")

    def _loop(self, n: int) -> tuple[int, int]:
        """Number of calls that returned 0, and the code of the one that did not."""
        function, begun, everything = self._function, self._begun, slice(None)
        count = begun.value
        for k, (arguments, (given, memory)) in enumerate(zip(self._calls[:n], self._copies, strict=False)):
            given[everything] = memory
            begun.value = count = count + 1
            code = function(*arguments)
            if code:
                return k, code
        return n, 0

    def stresses(self, n: int) -> FloatArray:
        """Mandel form of what the routine wrote."""
        return self.arena.stress.body[:n] * _ENGINEERING

    def tangent(self) -> FloatArray:
        """Mandel form of what the routine wrote."""
        return self.arena.tangent.body[0].reshape(6, 6) * _TANGENT
