"""A routine that is not ours, used like any other."""

from __future__ import annotations

from pathlib import Path
from types import TracebackType

import numpy as np

from drivers.foreign.arena import INCREMENT, Arena, LocalFailureError, increment_of
from drivers.foreign.failure import KINDS, RoutineFailureError
from drivers.foreign.framing import Frame
from drivers.foreign.isolation import Isolated, LostProcessError
from drivers.foreign.routine_file import RoutineFile, read_routine_file
from drivers.point import ControlError
from matlib.arrays import FloatArray
from matlib.errors import Fault, FileError, ParameterError
from matlib.routine import Block, BlockResponse, BlockRoutine, Increment, Update

__all__ = ["ForeignRoutine"]

STRAYING = ("out-of-bounds", "input-changed")
"""Failures that are seen by what has been overwritten."""


class ForeignRoutine(BlockRoutine):
    """A compiled routine, or one in Python, in a process of its own.

    Parameters
    ----------
    described : RoutineFile, str or Path
        Its routine file, read or not.

    Raises
    ------
    FileError
        If the file has a fault, or the routine cannot be loaded.
    RoutineFailureError
        If loading it ends its process.

    Notes
    -----
    Every method raises `RoutineFailureError` where the routine crashes, hangs, returns a code, raises, or leaves something that is no
    answer; the process is ended then, and the next call starts a new one. A context manager; a routine that is dropped, or alive when
    Python ends, leaves no process behind either. One call at a time: not for several threads at once.
    """

    def __init__(self, described: RoutineFile | str | Path) -> None:
        self.described = described if isinstance(described, RoutineFile) else read_routine_file(described)
        self._process: Isolated | None = None
        self._memory_size = self._started()[1]

    def __enter__(self) -> ForeignRoutine:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    @property
    def name(self) -> str:
        """Name of the routine."""
        return self.described.name

    @property
    def order(self) -> float:
        """The order of convergence that it claims."""
        return self.described.document.order

    @property
    def memory_size(self) -> int:
        """As the file says, or the Python object."""
        return self._memory_size

    @property
    def pid(self) -> int | None:
        """Process id while there is one."""
        return None if self._process is None or not self._process.alive else self._process.pid

    def close(self) -> None:
        """End the process. The next call starts a new one, which knows nothing of what this one saw."""
        if self._process is not None:
            self._process.end()
            self._process = None

    def update(self, increment: Increment, memory: FloatArray) -> Update:
        """Stress, tangent and new memory at the end of one increment."""
        head = [increment.time, increment.duration, *increment.temperature]
        numbers = np.concatenate([head, *increment.strain, memory])
        self._require(numbers.size == INCREMENT + self._memory_size, "memory", memory)
        if not (np.isfinite(numbers).all() and increment.duration >= 0.0):
            raise ParameterError("increment", "finite, with a duration >= 0 s, and memory finite", increment)
        answer = self._answer({"task": "update"}, [numbers], (6, 36, self._memory_size))
        return Update(answer[0], answer[1].reshape(6, 6), answer[2])

    def run(self, block: Block, strain: FloatArray, memory: FloatArray) -> BlockResponse:
        """Take all increments of a block in one message; mixed control is solved in the process of the routine."""
        n, free = block.duration.size, block.stress_controlled
        self._require(memory.shape == (self._memory_size,), "memory", memory)
        self._require(strain.shape == (6,) and block.targets.shape == (n, 6), "strain", strain)
        arrays = [block.time, block.duration, block.temperature, block.targets.ravel(), strain, memory]
        if not all(np.isfinite(array).all() for array in arrays) or (n and block.duration.min() < 0.0):
            raise ParameterError("block", "finite, with durations >= 0 s", "a number that is not")
        header = {"task": "run", "n": n, "free": [bool(one) for one in free]}
        sizes = (6 * n, self._memory_size, *((6 * n,) if free.any() else ()))
        answer = self._answer(header, arrays, sizes)
        strains = answer[2].reshape(n, 6) if free.any() else block.targets
        return BlockResponse(strains, answer[0].reshape(n, 6), answer[1])

    def _require(self, fine: bool, name: str, array: FloatArray) -> None:
        if not fine:
            raise ParameterError(name, f"of the right shape (memory_size is {self._memory_size})", array.shape)

    def _started(self) -> tuple[Isolated, int]:
        """The process, which is started where there is none; and the memory size that it tells."""
        if self._process is not None and self._process.alive:
            return self._process, self._memory_size
        self.close()
        document = self.described.document
        try:
            process = Isolated(self.described.loading, self.described.constants, document.time_limit)
        except LostProcessError as lost:
            raise RoutineFailureError(self.described.file, lost.kind, f"while it was loaded: {lost.detail}") from None
        header, _ = process.reply
        if "faulty" in header:
            process.end()
            key, found, expected = (str(header.get(name)) for name in ("faulty", "found", "expected"))
            raise FileError(self.described.file, [Fault(key=key, found=found, expected=expected)])
        size = header.get("memory_size")
        try:
            if not isinstance(size, int) or size < 0:
                raise LostProcessError("crash", "its process answered with something that is no answer")
            process.share(size)
        except LostProcessError as lost:
            process.end()
            raise RoutineFailureError(self.described.file, lost.kind, lost.detail) from None
        self._process = process
        return process, size

    def _answer(self, header: dict[str, object], arrays: list[FloatArray], sizes: tuple[int, ...]) -> list[FloatArray]:
        """Ask the process, and take its answer apart."""
        process, size = self._started()
        if size != self._memory_size:
            detail = f"memory_size was {self._memory_size} and is {size} in a new process"
            raise RoutineFailureError(self.described.file, "wrong-shape", detail)
        try:
            reply, numbers = process.ask(header, arrays)
        except LostProcessError as lost:
            raise self._failure(process, lost.kind, lost.detail, None) from None
        if reply.get("done") is True and numbers.size == sum(sizes):
            return np.split(numbers, np.cumsum(sizes)[:-1])
        raise self._refused(process, (reply, numbers))

    def _refused(self, process: Isolated, reply: Frame) -> Exception:
        """What a reply without an answer stands for."""
        header, numbers = reply
        if "uncontrolled" in header and numbers.size == 2:
            return ControlError(float(numbers[0]), float(numbers[1]))
        kind, row = header.get("failed"), header.get("row")
        if kind not in KINDS or not isinstance(row, int):
            kind, row = "crash", None
        detail = str(header.get("detail", "its process answered with something that is no answer"))
        return self._failure(process, str(kind), detail, row)

    def _failure(self, process: Isolated, kind: str, detail: str, row: int | None) -> RoutineFailureError:
        """A failure with the increment that caused it, read from the arena, whatever became of the process."""
        arena = process.arena
        assert arena is not None
        if row is None:  # the process died or hung; an earlier call may have been the one that went wrong
            row = arena.row
            if row and self.described.document.library is not None:
                try:
                    arena.check(row)
                except LocalFailureError as earlier:
                    row, kind, detail = earlier.row, earlier.kind, earlier.detail
        process.end()
        self._process = None
        last = arena.row
        if row is None or last is None or not 0 <= row <= last:
            return RoutineFailureError(self.described.file, kind, detail)
        if kind in STRAYING and last > 0:  # what a stray write hits need not belong to the call that wrote it
            culprit = self._one_by_one(arena, last)
            if culprit is not None:
                return culprit
        increment, memory = increment_of(arena.increments[row]), arena.memory.body[row].copy()
        return RoutineFailureError(self.described.file, kind, detail, increment, memory)

    def _one_by_one(self, arena: Arena, last: int) -> RoutineFailureError | None:
        """The failure that comes up when the increments of an arena are taken once more, each in a message of its own."""
        memory = arena.memory.body[0].copy()
        try:
            for row in arena.increments[: last + 1]:
                memory = self.update(increment_of(row), memory).memory
        except RoutineFailureError as failure:
            return failure
        except (FileError, ParameterError):
            return None
        return None
