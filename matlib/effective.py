r"""Effective moduli of loading modes from shear and bulk relaxation, exact.

Where shear and bulk share one reduced time, the elastic relation between moduli holds between their Carson transforms
(correspondence principle). The free sides of a mode put two moduli in line, :math:`1/M = a/A + b/B`, so that
:math:`M = A B/P` with :math:`P = a B + b A`. With :math:`s = -1/x` this is a rational function of `x` whose poles are
the times that `A` and `B` share and the roots of `P`, which is itself a Prony series; the residues at both are
positive, so `M` is a Prony series too. The creep compliance of a mode is `creep_of` its modulus.

References
----------
N. W. Tschoegl, The Phenomenological Theory of Linear Viscoelastic Behavior (1989), ch. 11 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, frozen, require_positive
from matlib.elastic import require_poisson_ratio
from matlib.errors import ParameterError
from matlib.interconversion import secular_roots
from matlib.prony import PronySeries
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
    return _in_line(1.0 / 3.0, G, 1.0 / 9.0, K)


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
    return _in_line(1.0 / 6.0, G, 2.0 / 9.0, K)


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
    return _in_line(0.25, G, 0.75, K.scaled(3.0).plus(G))


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

    Notes
    -----
    With constant `K` the relaxation times of :math:`G = 3KE/(9K - E)` are the roots of :math:`E - 9K`, one below each
    time of `young`, and :math:`G_i = 27 K^2/(\tau_i E'(\tau_i))`.
    """
    if nu is not None and K is None:
        ratio = require_poisson_ratio(nu)
        return young.scaled(0.5 / (1.0 + ratio)), young.scaled(1.0 / (3.0 * (1.0 - 2.0 * ratio)))
    if K is None or nu is not None:
        given = "neither" if K is None else "both"
        raise ParameterError("assumption on the other modulus", "exactly one of constant nu and constant K", given)
    bulk = require_positive("K", K, "Pa")
    if not young.instantaneous < 9.0 * bulk:
        expected = f"above E/9 = {young.instantaneous / 9.0:g} Pa, the instantaneous Young's modulus over nine"
        raise ParameterError("K", expected, K)
    E = young.merged()
    roots = secular_roots(E.times, E.moduli * E.times, E.equilibrium - 9.0 * bulk)
    shear = PronySeries(
        equilibrium=3.0 * bulk * (E.equilibrium / (9.0 * bulk - E.equilibrium)),
        moduli=27.0 * bulk * (bulk * roots.compliances()),
        times=roots.values,
    )
    return shear, PronySeries.elastic(bulk)


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

    def at(self, xi: ArrayLike) -> FloatArray:
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
    roots = roots_of_sum(1.0, G, 3.0, K)
    if roots.end > 0.0:
        long_term = _ratio_of(G.equilibrium, K.equilibrium)
    else:
        long_term = _ratio_of(float(G.moduli @ G.times), float(K.moduli @ K.times))
    return PoissonSeries(
        instantaneous=_ratio_of(G.instantaneous, K.instantaneous),
        long_term=long_term,
        amplitudes=1.5 * roots.first * roots.compliances,
        times=roots.times,
    )


def _ratio_of(G: float, K: float) -> float:
    return (3.0 * K - 2.0 * G) / (2.0 * (3.0 * K + G))


class SumRoots(NamedTuple):
    """The sum ``P = b A + a B`` of two moduli, and its roots where the two cancel, not where both vanish."""

    poles: FloatArray  # times of P, shape (n,)
    A: FloatArray  # moduli of A at these poles, zero where it has no term, shape (n,)
    B: FloatArray  # moduli of B, likewise
    end: float  # equilibrium modulus of P
    times: FloatArray  # the roots, shape (m,)
    compliances: FloatArray  # compliances of P at its roots, shape (m,)
    first: FloatArray  # b A at the roots, which is -a B there, shape (m,)


def roots_of_sum(b: float, first: PronySeries, a: float, second: PronySeries) -> SumRoots:
    P = first.scaled(b).plus(second.scaled(a))
    roots = secular_roots(P.times, P.moduli * P.times, P.equilibrium)
    inverse = 1.0 / roots.distances()
    A, B = _aligned(first, P.times), _aligned(second, P.times)
    terms_A, terms_B = b * inverse * (A * P.times), a * inverse * (B * P.times)
    size_A = np.abs(terms_A).sum(axis=1) + b * first.equilibrium
    size_B = np.abs(terms_B).sum(axis=1) + a * second.equilibrium
    at_root = np.where(  # the two are equal but for rounding: take the one with less of it
        size_A <= size_B,
        terms_A.sum(axis=1) + b * first.equilibrium,
        -(terms_B.sum(axis=1) + a * second.equilibrium),
    )
    compliances = roots.compliances()
    kept = (np.abs(at_root) > _ROUNDING * np.minimum(size_A, size_B)) & (compliances > 0.0)
    return SumRoots(P.times, A, B, P.equilibrium, roots.values[kept], compliances[kept], at_root[kept])


def _in_line(a: float, first: PronySeries, b: float, second: PronySeries) -> PronySeries:
    """Modulus `M` of two moduli in line, ``1/M = a/A + b/B``."""
    roots = roots_of_sum(b, first, a, second)
    shared = roots.A * (roots.B / (b * roots.A + a * roots.B))
    both = shared > 0.0
    end = first.equilibrium * (second.equilibrium / roots.end) if roots.end > 0.0 else 0.0
    return PronySeries(
        equilibrium=end,
        moduli=np.concatenate([shared[both], roots.first * (roots.first * roots.compliances) / (a * b)]),
        times=np.concatenate([roots.poles[both], roots.times]),
    )


def _aligned(series: PronySeries, times: FloatArray) -> FloatArray:
    """Moduli of `series` at the `times` of a sum that it is part of, zero where it has no term."""
    moduli = np.zeros(times.size)
    above = np.searchsorted(times, series.times).clip(max=max(times.size - 1, 0))
    below = np.maximum(above - 1, 0)
    nearest = np.where(series.times - times[below] < times[above] - series.times, below, above)
    np.add.at(moduli, nearest, series.moduli)
    return moduli
