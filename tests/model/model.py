"""A small finite-element model around a stress update: increments, Newton's method, one memory at every quadrature point."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest

from matlib.routine import Increment, Routine

skfem = pytest.importorskip("skfem", reason="needs scikit-fem")

ENOUGH = 1e-9  # residual, as a part of the largest nodal force: far above rounding, far below any error looked at
CORRECTIONS = 30  # at most


def mandel(field: skfem.DiscreteField, x: np.ndarray) -> np.ndarray:
    """Small strain of a displacement field, Mandel form, shape (6, elements, points), at the points `x`.

    Plane strain in two dimensions; in one, along the radius, plane strain about an axis: components r, hoop, axial.
    """
    gradient = field.grad
    strain = np.zeros((6, *gradient.shape[2:]))
    d = gradient.shape[0]
    if d == 1:
        strain[1] = field[0] / x[0]
    for i in range(d):
        strain[i] = gradient[i, i]
    for row, (i, j) in {3: (1, 2), 4: (0, 2), 5: (0, 1)}.items():
        if j < d:
            strain[row] = (gradient[i, j] + gradient[j, i]) / np.sqrt(2.0)
    return strain


def _extent(x: np.ndarray) -> np.ndarray | float:
    """What a point counts for beside its share of the mesh: the radius (one radian of the ring) in one dimension."""
    return x[0] if len(x) == 1 else 1.0


@skfem.LinearForm
def virtual_work(v, w):
    return _extent(w.x) * np.einsum("i...,i...->...", w.stress, mandel(v, w.x))


@skfem.BilinearForm
def stiffness(u, v, w):
    stress = np.einsum("ij...,j...->i...", w.tangent, mandel(u, w.x))
    return _extent(w.x) * np.einsum("i...,i...->...", stress, mandel(v, w.x))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class State:
    """The model at one time: displacement of every degree of freedom; strain, stress (Mandel) and memory of every point."""

    time: float
    temperature: float
    displacement: np.ndarray
    strain: np.ndarray
    stress: np.ndarray
    memory: np.ndarray
    residuals: tuple[float, ...] = ()
    """What Newton's method left, before and after each correction, as a part of the largest nodal force."""

    @property
    def corrections(self) -> int:
        """How often the displacement was corrected in the increment that led here."""
        return len(self.residuals) - 1


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Model:
    """A mesh whose quadrature points are all asked of one routine.

    `fixed` are the degrees of freedom whose displacement is prescribed.
    """

    routine: Routine
    basis: skfem.CellBasis
    fixed: np.ndarray

    def at_rest(self, temperature: float) -> State:
        """Nothing has happened yet."""
        points = self.basis.dx.size
        return State(
            time=0.0,
            temperature=temperature,
            displacement=np.zeros(self.basis.N),
            strain=np.zeros((points, 6)),
            stress=np.zeros((points, 6)),
            memory=np.zeros((points, self.routine.memory_size)),
        )

    def _by_element(self, values: np.ndarray) -> np.ndarray:
        """From one row a point to the points of each element last."""
        return np.moveaxis(values, 0, -1).reshape(*values.shape[1:], *self.basis.dx.shape)

    def strain_of(self, displacement: np.ndarray) -> np.ndarray:
        """Strain at every point, shape (points, 6)."""
        x = self.basis.global_coordinates()
        return mandel(self.basis.interpolate(displacement), np.asarray(x)).reshape(6, -1).T

    def forces(self, stress: np.ndarray) -> np.ndarray:
        """What the stress of all points holds at each degree of freedom [N]."""
        return virtual_work.assemble(self.basis, stress=self._by_element(stress))

    def take(
        self,
        start: State,
        duration: float,
        temperature: float,
        prescribed: np.ndarray | float,
        load: np.ndarray | float,
    ) -> State:
        """One increment: displacements `prescribed` where fixed, `load` at all others at its end."""
        displacement, residuals = start.displacement.copy(), []
        while True:
            strain = self.strain_of(displacement)
            updates = [
                self.routine.update(
                    Increment(
                        time=start.time,
                        duration=duration,
                        temperature=(start.temperature, temperature),
                        strain=(start.strain[q], strain[q]),
                    ),
                    start.memory[q],
                )
                for q in range(len(strain))
            ]
            stress = np.array([update.stress for update in updates])
            held = self.forces(stress)
            residual = load - held
            residual[self.fixed] = 0.0
            scale = max(np.abs(held).max(), np.abs(load).max())
            moved = np.zeros_like(displacement)
            moved[self.fixed] = prescribed - displacement[self.fixed]
            residuals.append(float(np.abs(residual).max() / scale) if scale > 0.0 else 0.0)
            if residuals[-1] <= ENOUGH and not moved.any():
                break
            assert len(residuals) <= CORRECTIONS, residuals
            tangent = self._by_element(np.array([update.tangent for update in updates]))
            matrix = stiffness.assemble(self.basis, tangent=tangent)
            displacement += skfem.solve(*skfem.condense(matrix, residual, x=moved, D=self.fixed))
            displacement[self.fixed] = prescribed
        return State(
            time=start.time + duration,
            temperature=temperature,
            displacement=displacement,
            strain=strain,
            stress=stress,
            memory=np.array([update.memory for update in updates]),
            residuals=tuple(residuals),
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class OtherTangent(Routine):
    """A routine whose stress is right and whose tangent is changed."""

    routine: Routine
    change: Callable[[np.ndarray], np.ndarray]

    @property
    def memory_size(self) -> int:
        return self.routine.memory_size

    def update(self, increment, memory):
        update = self.routine.update(increment, memory)
        return update._replace(tangent=self.change(update.tangent))
