"""Many materials at once, on the same increments: what `LinearViscoelastic` does for one, for each of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import BoolArray, FloatArray
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.packing import State, Terms, pack_members
from matlib.recursion import Recursion, find_recursion
from matlib.shift.family_ramp import integrated_by_law
from matlib.shift.reduced_time import ShiftRule, find_shift_rule

__all__ = ["Ensemble", "Room"]


class Room(NamedTuple):
    """Where responses are written, block after block: fresh memory for each costs more than the arithmetic.

    Parameters
    ----------
    strain, stress : ndarray, shape (numbers,)
    """

    strain: FloatArray
    stress: FloatArray

    @classmethod
    def of(cls, members: int, rows: int) -> Room:
        """For blocks of up to `rows` increments."""
        return cls(np.empty(members * rows * 6), np.empty(members * (rows + 1) * 6))

    def cut(self, members: int, n: int) -> tuple[FloatArray, FloatArray]:
        """Strains and stresses of a block, contiguous; an even number of rows of stress."""
        even = n + n % 2
        strain, stress = self.strain[: members * n * 6], self.stress[: members * even * 6]
        return strain.reshape(members, n, 6), stress.reshape(members, even, 6)


@dataclass(frozen=True, slots=True, eq=False, init=False)
class Ensemble:
    """Materials whose stress updates are taken side by side.

    Parameters
    ----------
    materials : sequence of Material
        At least one; numbers of terms may differ, and are filled up to the largest.
    recursion : Recursion, optional
        One with a compiled form; ``exponential`` if left out.
    shift_rule : callable, optional
        ``integrated`` if left out.

    Raises
    ------
    ParameterError
        If there is no material, or the recursion has no compiled form.
    """

    materials: tuple[Material, ...]
    recursion: Recursion
    shift_rule: ShiftRule
    shear: Terms
    bulk: Terms

    def __init__(
        self,
        materials: Sequence[Material],
        *,
        recursion: Recursion | None = None,
        shift_rule: ShiftRule | None = None,
    ) -> None:
        if not materials:
            raise ParameterError("materials", "at least one", "none")
        chosen = recursion or find_recursion("exponential")
        if not chosen.form.compiled:
            raise ParameterError("recursion", "one with a compiled form", repr(chosen.name))
        put = object.__setattr__
        put(self, "materials", tuple(materials))
        put(self, "recursion", chosen)
        put(self, "shift_rule", shift_rule or find_shift_rule("integrated"))
        put(self, "shear", pack_members([m.shear for m in materials], 2.0))
        put(self, "bulk", pack_members([m.bulk for m in materials]))

    def __len__(self) -> int:
        return len(self.materials)

    def start(self) -> State:
        """Every member at rest: no strain, no stress."""
        return State.at_rest(self.shear, self.bulk)

    def reduced_time(self, duration: FloatArray, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """Reduced times of increments, shape (members, n) [s at the T_ref of each]."""
        laws = [material.shift for material in self.materials]
        if self.shift_rule is find_shift_rule("integrated"):
            at_once = integrated_by_law(laws, duration, np.asarray(T_start), np.asarray(T_end))
            if at_once is not None:
                return at_once
        known: dict[int, FloatArray] = {}
        rows = np.empty((len(self), duration.size))
        for row, law in zip(rows, laws, strict=True):
            if id(law) not in known:
                known[id(law)] = self.shift_rule(law, duration, T_start, T_end)
            row[:] = known[id(law)]
        return rows

    def run(
        self,
        dxi: FloatArray,
        temperature: FloatArray,
        targets: FloatArray,
        stress_controlled: BoolArray,
        state: State,
        room: Room | None = None,
    ) -> tuple[FloatArray, FloatArray]:
        """Take every member over the increments; the state is changed in place.

        Parameters
        ----------
        dxi : ndarray, shape (members, n)
            As from `reduced_time`.
        temperature : ndarray, shape (n + 1,)
            At the increment ends, the first start included [K].
        targets : ndarray, shape (1 or members, n, 6)
            As in `routine.Block`; one for all, or one for each.
        stress_controlled : ndarray of bool, shape (6,)
        state : State
            As from `start`.
        room : Room, optional
            Large enough; what is returned lies in it.

        Returns
        -------
        strain, stress : ndarray, shape (members, n, 6)
            Mandel form [-], [Pa].
        """
        from matlib.compiling import announced
        from matlib.kernels import run_members

        members, n = dxi.shape
        expansion = np.array([3.0 * m.expansion for m in self.materials])
        strain, stress = (room or Room.of(members, n)).cut(members, n)
        if not stress_controlled.any():
            strain[:] = targets
        with np.errstate(over="ignore", under="ignore"), announced():
            run_members(
                self.recursion.form,
                dxi,
                np.ascontiguousarray(targets),
                np.array(stress_controlled),
                np.outer(expansion, np.diff(temperature)),
                self.shear,
                self.bulk,
                state,
                strain,
                stress,
            )
        return strain, stress[:, :n]
