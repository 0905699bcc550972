"""The arrays that a routine reads and writes, in memory that the harness can still read after the routine's process has died."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from matlib.arrays import FloatArray
from matlib.routine import Increment

__all__ = ["Arena", "Guarded", "LocalFailureError", "increment_of", "rows_for"]

GUARD = 8
"""Numbers before and, at least, after each array that a routine writes; nothing may change there."""

_PATTERN = np.uint64(0x7FF8_C0DE_C0DE_C0DE)
"""A NaN that no arithmetic makes: what guards hold."""

_UNWRITTEN = np.uint64(0x7FF8_0FF0_0FF0_0FF0)
"""Another one: what outputs hold until the routine writes them."""

_HEAD = 8
INCREMENT = 16
LARGEST = 4 * 2**20  # bytes
MOST_ROWS = 256


class LocalFailureError(Exception):
    """A failure inside the process of a routine: the row of the arena that caused it, its kind, and what happened."""

    def __init__(self, row: int, kind: str, detail: str) -> None:
        super().__init__(row, kind, detail)
        self.row = row
        self.kind = kind
        self.detail = detail


class Guarded(NamedTuple):
    """Rows of numbers with guards around each."""

    name: str
    whole: FloatArray
    body: FloatArray
    before: NDArray[np.uint64]
    after: NDArray[np.uint64]

    def guard(self) -> None:
        """Set every guard."""
        self.before[...] = _PATTERN
        self.after[...] = _PATTERN

    def forget(self, rows: slice) -> None:
        """Mark what rows hold as never written."""
        self.body.view(np.uint64)[rows] = _UNWRITTEN

    def first_broken(self, rows: slice) -> int | None:
        """The first of the rows whose guards have changed."""
        before, after = self.before[rows] != _PATTERN, self.after[rows] != _PATTERN
        if not (before.any() or after.any()):
            return None
        return int((before.any(axis=1) | after.any(axis=1)).argmax())

    def complaint(self, row: int) -> str:
        """How far beyond its end, or before its start, a row was written."""
        after = np.flatnonzero(self.after[row] != _PATTERN)
        if after.size:
            return f"wrote {self.name}[{self.body.shape[1] + int(after[0])}], which has {self.body.shape[1]} numbers"
        before = np.flatnonzero(self.before[row] != _PATTERN)
        return f"wrote {self.name}[{int(before[-1]) - GUARD}], before its start"

    def first_wild(self, rows: slice) -> int | None:
        """The first of the rows that hold a number that is not finite."""
        fine = np.isfinite(self.body[rows])
        return None if fine.all() else int((~fine.all(axis=1)).argmax())

    def wildness(self, row: int) -> str:
        """Which number of a row is not finite, and how."""
        column = int((~np.isfinite(self.body[row])).argmax())
        if self.body.view(np.uint64)[row, column] == _UNWRITTEN:
            return f"{self.name}[{column}] was never written"
        return f"{self.name}[{column}] is {self.body[row, column]}"


def _stride(width: int) -> int:
    """Whole cache lines, the guards on both sides included."""
    return GUARD + -(-(width + GUARD) // 8) * 8


def rows_for(memory_size: int) -> int:
    """Increments that one arena holds."""
    row = 8 * (2 * INCREMENT + INCREMENT + 2 * _stride(memory_size) + _stride(6) + _stride(36))
    return max(1, min(MOST_ROWS, LARGEST // row))


class Arena:
    """Increments, memories, stresses and tangents of a number of increments in a row.

    Parameters
    ----------
    buffer : writable buffer
        At least `size` bytes; shared by the harness and the process of the routine.
    memory_size : int
        Numbers that a point remembers.

    Attributes
    ----------
    increments : ndarray, shape (rows, 16)
        Time, duration, two temperatures, two strains (Mandel), as the harness means them.
    steps, steps_kept : ndarray, shape (rows, 16)
        The same as a compiled routine reads it, and a copy.
    given : Guarded
        Memory at the start of each increment, as the routine reads it.
    memory : Guarded
        ``rows + 1`` memories: row k is the one at the start of increment k, row k + 1 what the routine wrote.
    stress, tangent : Guarded
        What the routine wrote.
    """

    def __init__(self, buffer: memoryview, memory_size: int) -> None:
        self.rows = rows_for(memory_size)
        self._numbers = np.frombuffer(buffer, dtype=np.float64, count=self.size(memory_size) // 8)
        self._used = _HEAD
        self.head = self._numbers[:_HEAD].view(np.int64)
        """[calls begun in the life of the process, calls begun before row 0 of the arena]."""
        self.increments = self._taken(self.rows, INCREMENT)
        self.steps = self._taken(self.rows, INCREMENT)
        self.steps_kept = self._taken(self.rows, INCREMENT)
        self.given = self._guarded("memory", self.rows, memory_size)
        self.memory = self._guarded("memory_end", self.rows + 1, memory_size)
        self.stress = self._guarded("stress", self.rows, 6)
        self.tangent = self._guarded("tangent", self.rows, 36)

    @staticmethod
    def size(memory_size: int) -> int:
        """Bytes of an arena."""
        rows = rows_for(memory_size)
        memories = (2 * rows + 1) * _stride(memory_size)
        return 8 * (_HEAD + rows * (3 * INCREMENT + _stride(6) + _stride(36)) + memories)

    def _taken(self, rows: int, stride: int) -> FloatArray:
        start = self._used
        self._used += rows * stride
        return self._numbers[start : self._used].reshape(rows, stride)

    def _guarded(self, name: str, rows: int, width: int) -> Guarded:
        whole = self._taken(rows, _stride(width))
        bits = whole.view(np.uint64)
        return Guarded(name, whole, whole[:, GUARD : GUARD + width], bits[:, :GUARD], bits[:, GUARD + width :])

    @property
    def row(self) -> int | None:
        """The row whose call began last; None where none of this arena did."""
        row = int(self.head[0] - self.head[1]) - 1
        return row if 0 <= row < self.rows else None

    def guard(self) -> None:
        """Set all guards; to be done once, and after a failure."""
        for region in (self.given, self.memory, self.stress, self.tangent):
            region.guard()

    def prepare(self, n: int) -> None:
        """Make ready for `n` calls: nothing is written yet."""
        self.memory.forget(slice(1, n + 1))
        self.stress.forget(slice(0, n))
        self.tangent.forget(slice(0, n))
        self.head[1] = self.head[0]

    def check(self, n: int) -> None:
        """Look at what the first `n` calls of a compiled routine left behind.

        Raises
        ------
        LocalFailureError
            For the first call that wrote where it must not, or left a number that is not finite.
        """
        rows, ends = slice(0, n), slice(1, n + 1)
        found: list[tuple[int, int, str, str]] = []
        for region, part, offset in ((self.memory, ends, 1), (self.stress, rows, 0), (self.tangent, rows, 0)):
            row = region.first_broken(part)
            if row is not None:
                found.append((row, 0, "out-of-bounds", region.complaint(row + offset)))
            row = region.first_wild(part)
            if row is not None:
                found.append((row, 2, "not-finite", region.wildness(row + offset)))
        row = self.given.first_broken(rows)
        if row is not None:
            found.append((row, 0, "out-of-bounds", self.given.complaint(row)))
        for name, a, b in (
            ("step", self.steps, self.steps_kept),
            ("memory", self.given.body, self.memory.body),
        ):
            changed = a[rows].view(np.uint64) != b[rows].view(np.uint64)
            if changed.any():
                first = int(changed.any(axis=1).argmax())
                found.append((first, 1, "input-changed", f"wrote into its input `{name}`"))
        if found:
            row, _, kind, detail = min(found)
            raise LocalFailureError(row, kind, detail)


def increment_of(row: FloatArray) -> Increment:
    """An increment from its 16 numbers, its arrays its own."""
    time, duration, T_start, T_end = (float(value) for value in row[:4])
    return Increment(
        time=time,
        duration=duration,
        temperature=(T_start, T_end),
        strain=(row[4:10].copy(), row[10:16].copy()),
    )
