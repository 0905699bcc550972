"""What is timed: a made-up resin with many terms, strained in all six components while its temperature wanders."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from matlib.arrays import FloatArray
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.routine import Block
from matlib.shift import WLF
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["SEED", "Case", "case", "resin"]

SEED = 20

GLASSY_SHEAR, GLASSY_BULK = 1.1e9, 3.7e9  # Pa
T_REF = 353.15  # K


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Case:
    """A routine and the increments that it takes.

    Parameters
    ----------
    routine : LinearViscoelastic
    block : Block
        All increments, every strain given.
    dxi : ndarray, shape (n,)
        Reduced time of each [s]; every engine starts from it.
    """

    routine: LinearViscoelastic
    block: Block
    dxi: FloatArray

    @property
    def n(self) -> int:
        """How many increments."""
        return self.dxi.size


def resin(terms: int, *, spread: float = 0.0, rng: np.random.Generator | None = None) -> Material:
    """A solid with `terms` shear terms, one to three a decade around 1 s, and elastic bulk.

    Parameters
    ----------
    terms : int
    spread : float
        By how much moduli and times are scattered, as a factor ``exp(spread * normal)``.
    rng : Generator, optional
        Where the scatter comes from.
    """
    times = np.logspace(-6.0, 6.0, terms) if terms > 1 else np.array([1.0])
    weights = 1.0 / (1.0 + 0.1 * np.log10(times) ** 2)
    if rng is not None:
        times = times * np.exp(spread * rng.standard_normal(terms))
        weights = weights * np.exp(spread * rng.standard_normal(terms))
    return Material(
        shear=PronySeries.from_fractions(GLASSY_SHEAR, 0.95 * weights / weights.sum(), times),
        bulk=PronySeries.elastic(GLASSY_BULK),
        shift=WLF(C1=14.2, C2=161.0, T_ref=T_REF),
        expansion=6.2e-5,
    )


def case(n: int, terms: int = 20, *, even: bool = False) -> Case:
    """The case with `n` increments.

    Parameters
    ----------
    n : int
    terms : int
    even : bool
        Increments of one length at one temperature; else no two are alike.
    """
    rng = np.random.default_rng(SEED)
    duration = np.full(n, 1.0) if even else 10.0 ** rng.uniform(-2.0, 2.0, n)
    phase = np.linspace(0.0, 40.0 * np.pi, n + 1)
    temperature = np.full(n + 1, T_REF) if even else T_REF + 25.0 * np.sin(phase)
    strain = 0.01 * np.sin(np.outer(phase[1:], [1.0, 1.3, 0.7, 2.1, 1.9, 0.4])) + 1e-5 * rng.standard_normal((n, 6))
    ends = np.cumsum(duration)
    block = Block(
        time=np.concatenate([[0.0], ends[:-1]]),
        time_end=ends,
        duration=duration,
        temperature=temperature,
        targets=strain,
        stress_controlled=np.zeros(6, dtype=np.bool_),
    )
    routine = LinearViscoelastic(material=resin(terms))
    return Case(
        routine=routine,
        block=block,
        dxi=routine.reduced_time(duration, temperature[:-1], temperature[1:]),
    )
