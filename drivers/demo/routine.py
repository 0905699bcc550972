"""A stress update of the whole material in Python, as an example to start from; nothing to build, numpy is all it needs.

Isotropic, linear viscoelastic, thermorheologically simple, with thermal expansion. Six-vectors are in Mandel form: order 11 22 33 23
13 12, the shear entries of strain and stress alike multiplied by the root of 2, so that one projector serves both. Shift law: WLF. Shift
rule: ln a_T linear over the increment (mean-log). Recursion: exact for strain linear in reduced time (exponential). Second order.

Constants: G_inf, K_inf [Pa], n_shear, n_bulk, then n_shear pairs G_i [Pa], tau_i [s], then n_bulk pairs K_j [Pa], tau_j [s], then C1
(base 10), C2 [K], T_ref [K], alpha [1/K].
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

IDENTITY = np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
VOLUMETRIC = np.outer(IDENTITY, IDENTITY) / 3.0
DEVIATORIC = np.eye(6) - VOLUMETRIC


def gain_of(r: Array) -> Array:
    """(1 - exp(-r))/r, which is 1 at r = 0."""
    safe = np.where(r > 0.0, r, 1.0)
    return np.where(r > 0.0, -np.expm1(-safe) / safe, 1.0)


class Resin:
    """The routine; made of the constants of its routine file."""

    def __init__(self, constants: list[float]) -> None:
        n_shear, n_bulk = int(constants[2]), int(constants[3])
        if len(constants) != 8 + 2 * (n_shear + n_bulk):
            raise ValueError(f"{8 + 2 * (n_shear + n_bulk)} constants are needed, not {len(constants)}")
        self.G_inf, self.K_inf = constants[:2]
        shear, bulk = np.split(np.array(constants[4:-4]).reshape(-1, 2), [n_shear])
        (self.G, self.tau_G), (self.K, self.tau_K) = shear.T, bulk.T
        self.C1, self.C2, self.T_ref, self.alpha = constants[-4:]
        self.memory_size = 1 + n_bulk + 6 * n_shear

    def ln_shift(self, T: float) -> float:
        """WLF; no answer at or below its pole."""
        dT = T - self.T_ref
        if not self.C2 + dT > 0.0:
            raise ValueError(f"no shift factor at {T} K: the pole is at {self.T_ref - self.C2} K")
        return float(-np.log(10.0) * self.C1 * dT / (self.C2 + dT))

    def update(self, increment: Any, memory: Array) -> tuple[Array, Array, Array]:
        """Stress, tangent and new memory at the end of an increment."""
        T_start, T_end = increment.temperature
        ln_start, ln_end = self.ln_shift(T_start), self.ln_shift(T_end)
        mean = gain_of(np.array(abs(ln_end - ln_start)))  # logarithmic mean of the rates, over the larger one
        dxi = increment.duration * np.exp(-min(ln_start, ln_end)) * mean
        start, end = increment.strain
        step = end - start
        r_G, r_K = dxi / self.tau_G, dxi / self.tau_K

        mechanical = step @ IDENTITY - 3.0 * self.alpha * (T_end - T_start)
        volume = memory[0] + mechanical
        p = np.exp(-r_K) * memory[1 : 1 + self.K.size] + gain_of(r_K) * self.K * mechanical
        h = memory[1 + self.K.size :].reshape(-1, 6)
        h = np.exp(-r_G)[:, None] * h + np.outer(2.0 * gain_of(r_G) * self.G, DEVIATORIC @ step)

        stress = 2.0 * self.G_inf * (DEVIATORIC @ end) + h.sum(axis=0) + (self.K_inf * volume + p.sum()) * IDENTITY
        G, K = self.G_inf + gain_of(r_G) @ self.G, self.K_inf + gain_of(r_K) @ self.K
        tangent = 2.0 * G * DEVIATORIC + 3.0 * K * VOLUMETRIC
        return stress, tangent, np.concatenate([[volume], p, h.ravel()])
