"""A routine that is not ours as the thing that a study of increments runs."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from drivers.difference import largest_difference, shared_rows
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.reference import Reference, solve
from drivers.studies.trial import Rule, Runner
from matlib.material import Material
from matlib.routine import Routine

__all__ = ["RoutineRunner"]

FIRST = 4
"""How many times finer than a run the first of the runs is that it is judged against, where no card is named."""

LARGEST_RUN = 60_000
"""Increments of the finest of these at most."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RoutineRunner(Runner):
    """A routine with its own rule, judged against a material's reference solution, or else against its own finest run.

    Parameters
    ----------
    routine : Routine
    claimed_order : float
        The order of convergence that it claims.
    material : Material or None
        The material that it is meant to be.
    own_accuracy : float
        How well, as a fraction of the peak, its own finest run has to be settled where there is no material.
    """

    routine: Routine
    claimed_order: float
    material: Material | None
    own_accuracy: float = 1e-4

    @property
    def basis(self) -> str:
        """What `truth` is, in words."""
        return "the routine's own finest run" if self.material is None else "the card's reference solution"

    def order(self, rule: Rule) -> float:
        """As the routine claims."""
        return self.claimed_order

    def run(self, rule: Rule, path: Path) -> History:
        """Response with the increments of the path."""
        return drive(self.routine, path)

    def truth(self, path: Path, accuracy: float) -> Reference:
        """The reference solution where there is a material; else the routine's own finest run, `estimated`.

        Notes
        -----
        Increments are halved until two runs agree. What is left in the finer one follows from their difference, the routine's
        claimed order taken for granted, and is doubled; a material of which nothing is known allows no more.
        """
        if self.material is not None:
            return solve(self.material, path, accuracy=accuracy)
        factor, coarse = FIRST, self._rows(path, FIRST)
        while True:
            factor *= 2
            fine = self._rows(path, factor)
            left = 2.0 / (2.0**self.claimed_order - 1.0) * largest_difference(fine, coarse).relative
            if left <= max(accuracy, self.own_accuracy) or path.increment_count * factor * 2 > LARGEST_RUN:
                return _as_reference(fine, left)
            coarse = fine

    def _rows(self, path: Path, factor: int) -> History:
        """Response of a finer run at the increment ends of the path."""
        finer = path.refined(factor)
        own = tuple(segment.increments for segment in path.segments)
        _, rows = shared_rows(path, own, tuple(segment.increments for segment in finer.segments))
        return drive(self.routine, finer).taken(rows)


def _as_reference(history: History, relative: float) -> Reference:
    largest_strain = float(np.abs(history.strain_components).max())
    return Reference(
        history=replace(history, bound=np.full(len(history), relative * history.peak_stress)),
        strain_bound=np.full(len(history), relative * largest_strain),
        relative_bound=relative,
        estimated=True,
        pieces=0,
    )
