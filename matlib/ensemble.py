"""Many materials at once, on the same increments: what `LinearViscoelastic` does for one, for each of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import BoolArray, FloatArray
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.packing import State, Terms, pack, widened
from matlib.recursion import Recursion, find_recursion
from matlib.shift.base import ShiftLaw
from matlib.shift.reduced_time import ShiftRule, find_shift_rule

__all__ = ["Ensemble"]


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
        put(self, "shear", widened([pack(m.shear, 2.0) for m in materials]))
        put(self, "bulk", widened([pack(m.bulk) for m in materials]))

    def __len__(self) -> int:
        return len(self.materials)

    def start(self) -> State:
        """Every member at rest: no strain, no stress."""
        return State.at_rest(self.shear, self.bulk)

    def reduced_time(self, duration: FloatArray, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """Reduced times of increments, shape (members, n) [s at the T_ref of each]; once for each law that is shared."""
        known: dict[int, FloatArray] = {}
        rows = np.empty((len(self), duration.size))
        for row, material in zip(rows, self.materials, strict=True):
            law: ShiftLaw = material.shift
            if id(law) not in known:
                known[id(law)] = self.shift_rule(law, duration, T_start, T_end)
            row[:] = known[id(law)]
        return rows

    def run(
        self, dxi: FloatArray, temperature: FloatArray, targets: FloatArray, stress_controlled: BoolArray, state: State
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

        Returns
        -------
        strain, stress : ndarray, shape (members, n, 6)
            Mandel form [-], [Pa].
        """
        from matlib.compiling import announced
        from matlib.kernels import run_members

        members, n = dxi.shape
        expansion = np.array([3.0 * m.expansion for m in self.materials])
        strain = np.empty((members, n, 6))
        if not stress_controlled.any():
            strain[:] = targets
        stress = np.empty((members, n + n % 2, 6))
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
