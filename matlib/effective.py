r"""Effective moduli of loading modes from shear and bulk relaxation, exact.

Where shear and bulk share one reduced time, the elastic relation between moduli holds between their Carson transforms
(correspondence principle). Each reciprocal below is a sum with positive weights of reciprocals of Prony series, so it
is a creep series, and its reciprocal is a Prony series again. The creep compliance of a mode is `creep_of` its modulus.

References
----------
N. W. Tschoegl, The Phenomenological Theory of Linear Viscoelastic Behavior (1989), ch. 11 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from matlib.arrays import FloatArray, frozen, require_finite, require_positive
from matlib.errors import ParameterError
from matlib.interconversion import creep_of, relaxation_of, secular_roots
from matlib.prony import CreepSeries, PronySeries
from matlib.terms import ratios

__all__ = [
    "PoissonSeries",
    "equibiaxial_modulus",
    "plane_strain_tension_modulus",
    "poisson_ratio",
    "shear_and_bulk_of_young",
    "uniaxial_strain_modulus",
    "uniaxial_stress_modulus",
]

_ROUNDING = 16.0 * float(np.finfo(np.float64).eps)


def uniaxial_stress_modulus(G: PronySeries, K: PronySeries) -> PronySeries:
    r"""Young's modulus, from :math:`1/E = 1/(9K) + 1/(3G)`.

    Parameters
    ----------
    G, K : PronySeries
        Shear and bulk modulus [Pa].

    Returns
    -------
    E : PronySeries
        :math:`\sigma_{11}` a unit step of :math:`\epsilon_{11}`, sides free [Pa].

    Examples
    --------
    >>> uniaxial_stress_modulus(PronySeries.elastic(1.2), PronySeries.elastic(2.0)).instantaneous
    3.0
    """
    return _reciprocal_sum((1.0 / 3.0, G), (1.0 / 9.0, K))


def equibiaxial_modulus(G: PronySeries, K: PronySeries) -> PronySeries:
    r"""Equibiaxial modulus, from :math:`1/M = 1/(6G) + 2/(9K)`.

    Parameters
    ----------
    G, K : PronySeries
        Shear and bulk modulus [Pa].

    Returns
    -------
    M : PronySeries
        :math:`\sigma_{11} = \sigma_{22}` a unit step of :math:`\epsilon_{11} = \epsilon_{22}`, with
        :math:`\sigma_{33} = 0` [Pa].
    """
    return _reciprocal_sum((1.0 / 6.0, G), (2.0 / 9.0, K))


def plane_strain_tension_modulus(G: PronySeries, K: PronySeries) -> PronySeries:
    r"""Modulus of plane strain tension, from :math:`1/M = 1/(4G) + (3/4)/(3K + G)`.

    Parameters
    ----------
    G, K : PronySeries
        Shear and bulk modulus [Pa].

    Returns
    -------
    M : PronySeries
        :math:`\sigma_{11}` a unit step of :math:`\epsilon_{11}`, with :math:`\epsilon_{22} = 0` and
        :math:`\sigma_{33} = 0` [Pa].
    """
    return _reciprocal_sum((0.25, G), (0.75, K.scaled(3.0).plus(G)))


def uniaxial_strain_modulus(G: PronySeries, K: PronySeries) -> PronySeries:
    r"""Modulus of uniaxial strain, :math:`K + \tfrac{4}{3} G`.

    Parameters
    ----------
    G, K : PronySeries
        Shear and bulk modulus [Pa].

    Returns
    -------
    M : PronySeries
        :math:`\sigma_{11}` a unit step of :math:`\epsilon_{11}`, sides held [Pa].
    """
    return K.plus(G.scaled(4.0 / 3.0))


def shear_and_bulk_of_young(
    young: PronySeries, *, nu: float | None = None, K: float | None = None
) -> tuple[PronySeries, PronySeries]:
    r"""Shear and bulk modulus of a material whose Young's modulus was measured.

    Parameters
    ----------
    young : PronySeries
        Young's modulus, from relaxation in tension or bending [Pa].
    nu : float, optional
        Constant Poisson ratio [-], in (-1, 0.5): shear and bulk then take the fractions and times of `young`.
    K : float, optional
        Constant bulk modulus [Pa]: then :math:`1/(3G) = 1/E - 1/(9K)`.

    Returns
    -------
    G, K : PronySeries
        Shear and bulk modulus [Pa].

    Raises
    ------
    ParameterError
        If not exactly one of `nu` and `K` is given, `nu` is out of its range, or ``9 K`` does not exceed the
        instantaneous Young's modulus.
    """
    if nu is not None and K is None:
        ratio = require_finite("nu", nu)
        if not -1.0 < ratio < 0.5:
            raise ParameterError("nu", "above -1 and below 0.5", nu)
        return young.scaled(0.5 / (1.0 + ratio)), young.scaled(1.0 / (3.0 * (1.0 - 2.0 * ratio)))
    if K is None or nu is not None:
        given = "neither" if K is None else "both"
        raise ParameterError("assumption on the other modulus", "exactly one of constant nu and constant K", given)
    bulk = require_positive("K", K, "Pa")
    creep = creep_of(young)
    rest = creep.instantaneous_compliance - 1.0 / (9.0 * bulk)
    if not rest > 0.0:
        expected = f"above E/9 = {young.instantaneous / 9.0:g} Pa, the instantaneous Young's modulus over nine"
        raise ParameterError("K", expected, K)
    tripled = CreepSeries(
        instantaneous_compliance=rest, compliances=creep.compliances, times=creep.times, fluidity=creep.fluidity
    )
    return relaxation_of(tripled).scaled(1.0 / 3.0), PronySeries.elastic(bulk)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PoissonSeries:
    r"""A Poisson ratio :math:`\nu(\xi) = \nu_\infty + \sum_i a_i \exp(-\xi/\rho_i)`.

    Parameters
    ----------
    instantaneous, long_term : float
        Poisson ratio at once and after a very long time [-].
    amplitudes : ndarray, shape (n,)
        Amplitudes :math:`a_i` of either sign [-]; they sum to ``instantaneous - long_term``.
    times : ndarray, shape (n,)
        Times :math:`\rho_i` [s at the reference temperature], ascending.
    """

    instantaneous: float
    long_term: float
    amplitudes: FloatArray
    times: FloatArray

    def __post_init__(self) -> None:
        object.__setattr__(self, "amplitudes", frozen(self.amplitudes))
        object.__setattr__(self, "times", frozen(self.times))

    def at(self, xi: npt.ArrayLike) -> FloatArray:
        """Poisson ratio at reduced time `xi` [s], ``>= 0``, after a step of strain; of the shape of `xi`."""
        return np.asarray(np.exp(-ratios("xi", xi, self.times)) @ self.amplitudes + self.long_term)


def poisson_ratio(G: PronySeries, K: PronySeries) -> PoissonSeries:
    r"""Poisson ratio after a step of axial strain in uniaxial stress.

    Parameters
    ----------
    G, K : PronySeries
        Shear and bulk modulus [Pa].

    Returns
    -------
    nu : PoissonSeries
        Minus the lateral strain a unit step of axial strain. Terms no larger than their own rounding error are left
        out, so that shear and bulk of equal fractions and times give a constant.

    Notes
    -----
    In Carson transforms :math:`\nu = (3K - 2G)/(2P)` with :math:`P = 3K + G`. Its poles are the retardation times
    :math:`\rho_i` of `P`; with :math:`P = 0` the numerator is :math:`-3G`, so that
    :math:`a_i = \tfrac32 D_i G(\rho_i)`, where :math:`D_i` is the compliance of `P` at :math:`\rho_i`. Where both
    relax to zero the long-term ratio is the one of the two viscosities.

    Examples
    --------
    >>> nu = poisson_ratio(PronySeries(equilibrium=0.0, moduli=[1.2], times=[1.0]), PronySeries.elastic(2.0))
    >>> round(nu.instantaneous, 12), nu.long_term
    (0.25, 0.5)
    """
    P = K.scaled(3.0).plus(G)
    weights = P.moduli * P.times
    roots = secular_roots(P.times, weights, P.equilibrium)
    rho = roots.values
    inverse = 1.0 / roots.distances(P.times)
    shear = _aligned(G, P.times)
    terms = inverse * (shear * P.times)
    with np.errstate(over="ignore"):
        compliances = 1.0 / (rho * ((inverse * inverse) @ weights))
        amplitudes = 1.5 * compliances * (terms.sum(axis=1) + G.equilibrium)
        noise = 1.5 * compliances * (np.abs(terms).sum(axis=1) + G.equilibrium) * _ROUNDING
    kept = np.abs(amplitudes) > noise
    if P.equilibrium > 0.0:
        long_term = _ratio_of(G.equilibrium, K.equilibrium)
    else:
        long_term = _ratio_of(float(G.moduli @ G.times), float(K.moduli @ K.times))
    return PoissonSeries(
        instantaneous=_ratio_of(G.instantaneous, K.instantaneous),
        long_term=long_term,
        amplitudes=amplitudes[kept],
        times=rho[kept],
    )


def _ratio_of(G: float, K: float) -> float:
    return (3.0 * K - 2.0 * G) / (2.0 * (3.0 * K + G))


def _aligned(series: PronySeries, times: FloatArray) -> FloatArray:
    """Moduli of `series` at the `times` of a sum that it is part of, zero where it has no term."""
    moduli = np.zeros(times.size)
    above = np.searchsorted(times, series.times).clip(max=max(times.size - 1, 0))
    below = np.maximum(above - 1, 0)
    nearest = np.where(series.times - times[below] < times[above] - series.times, below, above)
    np.add.at(moduli, nearest, series.moduli)
    return moduli


def _reciprocal_sum(first: tuple[float, PronySeries], second: tuple[float, PronySeries]) -> PronySeries:
    """Modulus whose reciprocal is the weighted sum of the reciprocals of two series."""
    (a, A), (b, B) = first, second
    if _proportional(A, B):
        return A.scaled(1.0 / (a + b * (A.instantaneous / B.instantaneous)))
    return relaxation_of(creep_of(A).scaled(a).plus(creep_of(B).scaled(b)))


def _proportional(A: PronySeries, B: PronySeries) -> bool:
    """Whether two series share times and fractions to rounding."""
    if A.times.size != B.times.size or not np.array_equal(A.times, B.times):
        return False
    factor = A.instantaneous / B.instantaneous
    unlike = np.abs(A.moduli - factor * B.moduli) > _ROUNDING * A.moduli
    unlike_end = abs(A.equilibrium - factor * B.equilibrium) > _ROUNDING * A.equilibrium
    return not (unlike_end or unlike.any())
