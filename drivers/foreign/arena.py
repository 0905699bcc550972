"""The arrays that a routine reads and writes, in memory that the harness can still read after the routine's process has died."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from matlib.arrays import FloatArray
from matlib.routine import Increment

__all__ = ["Arena", "Guarded", "LocalFailureError", "increment_of", "rows_for"]

GUARD = 16
"""Numbers, at least, before and after each array that a routine writes; nothing may change there."""

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
    """Rows of numbers with guards between them, before the first and after the last.

    Parameters
    ----------
    name : str
        As the contract calls it.
    body : ndarray, shape (rows, width)
    gaps : ndarray of uint64, shape (rows + 1, gap)
        The guards: row k before body k, row k + 1 after it.
    """

    name: str
    body: FloatArray
    gaps: NDArray[np.uint64]

    def guard(self) -> None:
        """Set every guard."""
        self.gaps[...] = _PATTERN

    def forget(self, rows: slice) -> None:
        """Mark what rows hold as never written."""
        self.body.view(np.uint64)[rows] = _UNWRITTEN

    def complaint_of_gaps(self, first: int, stop: int) -> tuple[int, str] | None:
        """Whether a guard around the rows `first` to `stop` has changed: the row next to it, and what was written."""
        gaps = self.gaps[first : stop + 1]
        if gaps.tobytes() == _PATTERN.tobytes() * gaps.size:
            return None
        broken = gaps != _PATTERN
        gap = int(broken.any(axis=1).argmax())
        places, width = np.flatnonzero(broken[gap]), self.body.shape[1]
        if gap > 0 and places[0] < gaps.shape[1] - 1 - places[-1]:
            return first + gap - 1, f"wrote {self.name}[{width + int(places[0])}], which has {width} numbers"
        return first + gap, f"wrote {self.name}[{int(places[-1]) - gaps.shape[1]}], before its start"

    def complaint_of_numbers(self, first: int, stop: int) -> tuple[int, str] | None:
        """Whether a number in the rows `first` to `stop` is not finite: its row, and how."""
        fine = np.isfinite(self.body[first:stop])
        if fine.all():
            return None
        row = first + int((~fine.all(axis=1)).argmax())
        column = int((~np.isfinite(self.body[row])).argmax())
        if self.body[row].view(np.uint64)[column] == _UNWRITTEN:
            return row, f"{self.name}[{column}] was never written"
        return row, f"{self.name}[{column}] is {self.body[row, column]}"


def _stride(width: int) -> int:
    """Whole cache lines, the guard included."""
    return -(-(width + GUARD) // 8) * 8


def _row_size(memory_size: int) -> int:
    return 3 * INCREMENT + 2 * _stride(memory_size) + _stride(6) + _stride(36)


def rows_for(memory_size: int) -> int:
    """Increments that one arena holds."""
    return max(1, min(MOST_ROWS, LARGEST // (8 * _row_size(memory_size))))


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
        once = 3 * _stride(memory_size) + _stride(6) + _stride(36)  # guards before the first rows, one more memory
        return 8 * (_HEAD + rows_for(memory_size) * _row_size(memory_size) + once)

    def _taken(self, rows: int, stride: int) -> FloatArray:
        start = self._used
        self._used += rows * stride
        return self._numbers[start : self._used].reshape(rows, stride)

    def _guarded(self, name: str, rows: int, width: int) -> Guarded:
        whole = self._taken(
            rows + 1, _stride(width)
        )  # each row a body and the guard after it; the first body is unused
        return Guarded(name, whole[1:, :width], whole.view(np.uint64)[:, width:])

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
        self.steps_kept[:n] = self.steps[:n]
        self.head[1] = self.head[0]

    def check(self, n: int) -> None:
        """Look at what the first `n` calls of a compiled routine left behind.

        Raises
        ------
        LocalFailureError
            For the first call that wrote where it must not, or left a number that is not finite.
        """
        found: list[tuple[int, int, str, str]] = []
        for region, first in ((self.given, 0), (self.memory, 1), (self.stress, 0), (self.tangent, 0)):
            complaint = region.complaint_of_gaps(first, first + n)
            if complaint is not None:
                found.append((complaint[0] - first, 0, "out-of-bounds", complaint[1]))
            complaint = region.complaint_of_numbers(first, first + n)
            if complaint is not None:
                found.append((complaint[0] - first, 2, "not-finite", complaint[1]))
        for name, now, before in (
            ("step", self.steps[:n], self.steps_kept[:n]),
            ("memory", self.given.body[:n], self.memory.body[:n]),
        ):
            if now.tobytes() != before.tobytes():
                row = int((now.view(np.uint64) != before.view(np.uint64)).any(axis=1).argmax())
                found.append((row, 1, "input-changed", f"wrote into its input `{name}`"))
        if found:
            row, _, kind, detail = min(found)
            raise LocalFailureError(min(max(row, 0), n - 1), kind, detail)


def increment_of(row: FloatArray) -> Increment:
    """An increment from its 16 numbers, its arrays its own."""
    time, duration, T_start, T_end = (float(value) for value in row[:4])
    return Increment(
        time=time,
        duration=duration,
        temperature=(T_start, T_end),
        strain=(row[4:10].copy(), row[10:16].copy()),
    )
