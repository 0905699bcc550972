"""A routine taken over increments one by one, and the closed forms that its answer is compared with."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from matlib.prony import PronySeries
from matlib.routine import Increment, Routine
from matlib.tensors import DEVIATORIC, IDENTITY


def march(
    routine: Routine,
    durations: ArrayLike,
    temperatures: ArrayLike,
    strains: ArrayLike,
    memory: np.ndarray | None = None,
) -> tuple[np.ndarray, np.ndarray]:
    """Stress at all increment ends, shape (n, 6), and the memory at the last.

    Temperatures [K] and strains are given at the n + 1 ends; a single one holds throughout.
    """
    durations = np.atleast_1d(np.asarray(durations, dtype=float))
    n = durations.size
    T = np.broadcast_to(np.asarray(temperatures, dtype=float), (n + 1,))
    strain = np.broadcast_to(np.asarray(strains, dtype=float), (n + 1, 6))
    memory = np.zeros(routine.memory_size) if memory is None else memory
    stress = np.empty((n, 6))
    time = 0.0
    for k in range(n):
        update = routine.update(
            Increment(
                time=time,
                duration=float(durations[k]),
                temperature=(float(T[k]), float(T[k + 1])),
                strain=(strain[k], strain[k + 1]),
            ),
            memory,
        )
        stress[k], memory = update.stress, update.memory
        time += float(durations[k])
    return stress, memory


def relaxed(series: PronySeries, xi: float) -> float:
    """Relaxation modulus at reduced time `xi`, term by term."""
    terms = zip(series.moduli.tolist(), series.times.tolist(), strict=True)
    return math.fsum([series.equilibrium, *(m * math.exp(-xi / tau) for m, tau in terms)])


def ramped(series: PronySeries, xi: float, length: float) -> float:
    """Mean of the modulus over a ramp of `length` in reduced time, `xi` after its end: stress a strain of one."""
    terms = zip(series.moduli.tolist(), series.times.tolist(), strict=True)
    return math.fsum(
        [series.equilibrium, *(m * tau / length * -math.expm1(-length / tau) * math.exp(-xi / tau) for m, tau in terms)]
    )


def isotropic(G: float, K: float, strain: np.ndarray, thermal: float = 0.0) -> np.ndarray:
    """Stress of a linear thermal volume strain `thermal` and a strain, both answered with one pair of moduli."""
    return 2.0 * G * (DEVIATORIC @ strain) + K * (strain @ IDENTITY - thermal) * IDENTITY
