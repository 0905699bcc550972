"""All increments of a path laid out once, for runs of many rules."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from drivers.history import History
from drivers.path import Path, segment_blocks
from matlib.arrays import FloatArray
from matlib.material import Material
from matlib.routine import Block
from matlib.shift import find_shift_rule
from matlib.tensors import stress_from_mandel
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["Plan", "laid_out"]

LARGEST_BLOCK = 16_384
"""Increments that are taken in one call."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Plan:
    """The increments of a path, the same for every rule; reduced times are kept by the shift rule that they were asked for.

    Parameters
    ----------
    blocks : tuple of Block
        In order; one may hold many short segments.
    segment : tuple of str, length n + 1
        Label of each increment end, the start included.
    time, temperature : ndarray, shape (n + 1,)
        [s], [K].
    """

    blocks: tuple[Block, ...]
    segment: tuple[str, ...]
    time: FloatArray
    temperature: FloatArray
    clocks: dict[str, tuple[FloatArray, ...]] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self.segment)

    def clock(self, material: Material, shift_rule: str) -> tuple[FloatArray, ...]:
        """Reduced time of each increment of each block [s at T_ref]."""
        if shift_rule not in self.clocks:
            rule = find_shift_rule(shift_rule)
            self.clocks[shift_rule] = tuple(
                rule(material.shift, block.duration, block.temperature[:-1], block.temperature[1:])
                for block in self.blocks
            )
        return self.clocks[shift_rule]

    def run(self, routine: LinearViscoelastic, clock: tuple[FloatArray, ...]) -> History | None:
        """Response of a routine at all increment ends, on the given clock; None where it is not finite."""
        strain, memory = np.zeros(6), np.zeros(routine.memory_size)
        strains, stresses = [np.zeros((1, 6))], [np.zeros((1, 6))]
        for block, dxi in zip(self.blocks, clock, strict=True):
            response = replace(routine, shift_rule=lambda *_, known=dxi: known).run(block, strain, memory)
            strain, memory = response.strain[-1], response.memory
            strains.append(response.strain)
            stresses.append(response.stress)
        all_strains, all_stresses = np.concatenate(strains), np.concatenate(stresses)
        if not (np.isfinite(all_strains).all() and np.isfinite(all_stresses).all()):
            return None
        return History(
            segment=self.segment,
            time=self.time,
            temperature=self.temperature,
            reduced_time=np.concatenate([[0.0], np.cumsum(np.concatenate(clock))]),
            strain=all_strains,
            stress=all_stresses,
            peak_stress=float(np.abs(stress_from_mandel(all_stresses)).max()),
        )


def laid_out(path: Path) -> Plan | None:
    """Lay out all increments of a path.

    Returns
    -------
    Plan or None
        None where the kind of control changes, so that what a segment holds depends on the response.
    """
    if len({segment.stress_controlled.tobytes() for segment in path.segments}) != 1:
        return None
    values, time, T = np.zeros(6), 0.0, path.start_temperature
    parts: list[Block] = []
    labels = ["start"]
    for _, label, segment in path.unrolled():
        for block in segment_blocks(segment, time, T, values):
            parts.append(block)
            labels += [label] * block.duration.size
            values, T = block.targets[-1], float(block.temperature[-1])
        time += segment.duration
    blocks, pending, size = [], [], 0
    for block in parts:
        pending.append(block)
        size += block.duration.size
        if size >= LARGEST_BLOCK:
            blocks.append(_joined(pending))
            pending, size = [], 0
    if pending:
        blocks.append(_joined(pending))
    return Plan(
        blocks=tuple(blocks),
        segment=tuple(labels),
        time=np.concatenate([[0.0], *(b.time_end for b in blocks)]),
        temperature=np.concatenate([blocks[0].temperature[:1], *(b.temperature[1:] for b in blocks)]),
    )


def _joined(blocks: list[Block]) -> Block:
    first = blocks[0]
    return Block(
        time=np.concatenate([b.time for b in blocks]),
        time_end=np.concatenate([b.time_end for b in blocks]),
        duration=np.concatenate([b.duration for b in blocks]),
        temperature=np.concatenate([first.temperature[:1], *(b.temperature[1:] for b in blocks)]),
        targets=np.concatenate([b.targets for b in blocks]),
        stress_controlled=first.stress_controlled,
    )
