"""A routine inside its own process."""

from __future__ import annotations

from abc import abstractmethod

import numpy as np

from drivers.foreign.arena import Arena
from drivers.point import ControlError
from matlib.arrays import FloatArray
from matlib.routine import Block, BlockResponse, Increment, Routine, Update

__all__ = ["FaultyRoutineError", "LocalRoutine"]


class FaultyRoutineError(Exception):
    """A routine that cannot be loaded: the key of its file, what was found, what is expected."""

    def __init__(self, key: str, found: str, expected: str) -> None:
        super().__init__(key, found, expected)
        self.key = key
        self.found = found
        self.expected = expected


class LocalRoutine(Routine):
    """A routine that takes its increments from an arena and leaves its answers there."""

    arena: Arena

    @abstractmethod
    def call(self, n: int) -> None:
        """Take the first `n` increments of the arena in turn; `LocalFailureError` where one fails."""

    @abstractmethod
    def stresses(self, n: int) -> FloatArray:
        """Stress at the end of the first `n` increments, Mandel form, shape (n, 6) [Pa]."""

    @abstractmethod
    def tangent(self) -> FloatArray:
        """Tangent of the first increment, Mandel form, shape (6, 6) [Pa]."""

    def update(self, increment: Increment, memory: FloatArray) -> Update:
        """Take one increment."""
        row = self.arena.increments[0]
        row[0], row[1] = increment.time, increment.duration
        row[2:4] = increment.temperature
        row[4:10], row[10:16] = increment.strain
        if not np.isfinite(row).all():  # the routine's tangent led the iteration there
            raise ControlError(increment.time, float("inf"))
        self.arena.memory.body[0] = memory
        self.call(1)
        return Update(self.stresses(1)[0], self.tangent(), self.arena.memory.body[1].copy())

    def take(self, block: Block, strain: FloatArray, memory: FloatArray) -> BlockResponse:
        """Take a block under strain control, as many increments at a time as the arena holds."""
        arena, total = self.arena, block.duration.size
        stress = np.empty((total, 6))
        for start in range(0, total, arena.rows):
            stop = min(start + arena.rows, total)
            n, targets = stop - start, block.targets[start:stop]
            rows = arena.increments[:n]
            rows[:, 0], rows[:, 1] = block.time[start:stop], block.duration[start:stop]
            rows[:, 2], rows[:, 3] = block.temperature[start:stop], block.temperature[start + 1 : stop + 1]
            rows[0, 4:10], rows[1:, 4:10], rows[:, 10:16] = strain, targets[:-1], targets
            arena.memory.body[0] = memory
            self.call(n)
            stress[start:stop] = self.stresses(n)
            strain, memory = targets[-1], arena.memory.body[n].copy()
        return BlockResponse(block.targets, stress, memory)
