r"""Exact interconversion of relaxation and creep, by poles and residues of the Carson transform.

With :math:`s = -1/x` the Carson transform of a relaxation modulus is a rational function of `x`, and so is its
reciprocal, that of the creep compliance. The zeros of one are the poles of the other: the retardation times are the
roots of :math:`M_\infty + \sum_j M_j\tau_j/(\tau_j - x) = 0`, and the relaxation times those of
:math:`\phi + D_g/(0 - x) + \sum_j D_j/(\rho_j - x) = 0`. Both are secular equations, rising between neighbouring
poles, and one solver serves both.

References
----------
N. W. Tschoegl, The Phenomenological Theory of Linear Viscoelastic Behavior (1989), ch. 8 (from memory). Roots as
offsets from the nearest pole: as in the divide-and-conquer method for the symmetric tridiagonal eigenproblem,
J. J. M. Cuppen, Numer. Math. 36 (1981) 177-195 (from memory).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from matlib.arrays import FloatArray
from matlib.errors import ParameterError
from matlib.prony import CreepSeries, PronySeries

__all__ = ["SecularRoots", "creep_of", "relaxation_of", "secular_roots"]

_TINY = float(np.finfo(np.float64).tiny)
_LONGEST = 1e300  # s


class SecularRoots(NamedTuple):
    """Roots ``base + offset`` of a secular equation, ascending.

    Parameters
    ----------
    poles : ndarray, shape (n,)
        Poles of the equation.
    leading : float
        Size of its leading coefficient for large `x`: the constant, or the sum of the weights where that is zero.
    base : ndarray, shape (m,)
        The pole nearest to each root, or zero.
    offset : ndarray, shape (m,)
        Signed distance of the root from it, to full relative precision, however small.
    """

    poles: FloatArray
    leading: float
    base: FloatArray
    offset: FloatArray

    @property
    def values(self) -> FloatArray:
        """The roots as plain numbers, shape (m,); a root very near to its pole rounds to it."""
        return self.base + self.offset

    def distances(self) -> FloatArray:
        """``poles - root`` without cancellation, shape (m, n)."""
        return self.poles - self.base[:, np.newaxis] - self.offset[:, np.newaxis]

    def compliances(self) -> FloatArray:
        r"""Weights :math:`1/(x_i h'(x_i))` of the reciprocal function, shape (m,).

        The compliances of the creep series, where ``h`` is the transform of a relaxation modulus.

        Notes
        -----
        From the product form :math:`h'(x_i) = c \prod_{k\ne i}(x_i - x_k)/\prod_j(x_i - p_j)`, in which every factor
        has full relative precision: the weights are then those of one equation that has all the computed roots exactly,
        and that differs from the given one by some roundings. The sum of ``u_j/(p_j - x)^2`` lacks that where a weak
        pole happens to lie near a root of the rest (M. Gu, S. C. Eisenstat, SIAM J. Matrix Anal. Appl. 15 (1994)
        1266-1276; from memory).
        """
        factors = np.abs(self.distances())
        between = np.subtract.outer(self.base, self.base) + np.subtract.outer(self.offset, self.offset)
        np.fill_diagonal(between, 1.0)
        factors[:, : self.base.size] /= np.abs(between)
        return np.prod(factors, axis=1) / (self.values * self.leading)


def secular_roots(poles: FloatArray, weights: FloatArray, constant: float) -> SecularRoots:
    r"""All positive roots of :math:`h(x) = c + \sum_j u_j/(p_j - x)`.

    Parameters
    ----------
    poles : ndarray, shape (n,)
        Poles :math:`p_j`, strictly ascending, ``>= 0``.
    weights : ndarray, shape (n,)
        Weights :math:`u_j`, ``> 0``.
    constant : float
        Constant :math:`c`. Where it is negative, so must be ``h(0)``.

    Returns
    -------
    roots : SecularRoots
        One root in each gap; one beyond the last pole where ``constant > 0``, one below the first where it is negative.

    Raises
    ------
    ParameterError
        If a positive constant is so small that the last root exceeds 1e300.

    Notes
    -----
    The terms enter with full relative precision, so each root is that of an equation whose weights differ from the
    given ones by a few roundings. The distance to the nearest pole is found by bisection over the bit patterns of
    positive floats, whose order is that of the numbers: about 63 halvings reach two neighbouring floats from any start.

    Examples
    --------
    >>> secular_roots(np.array([1.0, 3.0]), np.array([1.0, 1.0]), 0.0).values.tolist()
    [2.0]
    """
    if poles.size == 0:
        return SecularRoots(poles, abs(constant), poles, poles)
    total = float(weights.sum())
    u = weights / total
    c = constant / total

    edges = np.concatenate([[0.0], poles]) if c < 0.0 else poles
    reach = 0.5 * np.diff(edges)
    middle = poles - edges[:-1, np.newaxis] - reach[:, np.newaxis]
    is_lower = c + (1.0 / middle) @ u >= 0.0  # h rises: the root is in the lower half of its gap
    base = np.where(is_lower, edges[:-1], edges[1:])
    sign = np.where(is_lower, 1.0, -1.0)
    if c > 0.0:
        # h(x) >= c - 1/(x - p_n) beyond the last pole p_n, so the root is at most 1/c away from it
        base = np.append(base, poles[-1])
        sign = np.append(sign, 1.0)
        if c * _LONGEST < 1.0:
            raise ParameterError("long-term part", f"zero, or reached within {_LONGEST:g} s", constant)
        reach = np.append(reach, 1.0 / c)

    low = np.full(base.size, _TINY).view(np.int64)
    high = np.maximum(reach, _TINY).view(np.int64)
    from_base = poles - base[:, np.newaxis]
    with np.errstate(over="ignore"):
        while np.any(high - low > 1):
            trial = low + (high - low) // 2
            offset = sign * trial.view(np.float64)
            h = c + (1.0 / (from_base - offset[:, np.newaxis])) @ u
            too_near = sign * h < 0.0
            low = np.where(too_near, trial, low)
            high = np.where(too_near, high, trial)
    return SecularRoots(poles, abs(constant) if constant else total, base, sign * high.view(np.float64))


def creep_of(series: PronySeries) -> CreepSeries:
    r"""Creep compliance of the material that relaxes as `series`.

    Parameters
    ----------
    series : PronySeries
        Relaxation modulus, ``n`` terms after equal times are merged.

    Returns
    -------
    creep : CreepSeries
        ``n`` retarded terms for a solid, whose times interlace with those of `series` (each a little longer than its
        own); ``n - 1`` and a fluidity for a liquid. A term whose weight underflows to zero is left out.

    Notes
    -----
    :math:`D_g = 1/M_0`, :math:`D_i = 1/(\rho_i f'(\rho_i))` with :math:`f' = \sum_j M_j\tau_j/(\tau_j - x)^2`, and
    :math:`\phi = 1/\sum_j M_j\tau_j` for a liquid.

    Examples
    --------
    >>> creep = creep_of(PronySeries(equilibrium=1.0, moduli=[2.0], times=[5.0]))
    >>> creep.times.round(12).tolist(), creep.compliances.round(12).tolist()
    ([15.0], [0.666666666667])
    """
    merged = series.merged()
    roots = secular_roots(merged.times, merged.moduli * merged.times, merged.equilibrium)
    rho = roots.values
    compliances = roots.compliances()
    kept = compliances > 0.0
    viscosity = merged.viscosity
    return CreepSeries(
        instantaneous_compliance=1.0 / merged.instantaneous,
        compliances=compliances[kept],
        times=rho[kept],
        fluidity=0.0 if viscosity is None else 1.0 / viscosity,
    )


def relaxation_of(creep: CreepSeries) -> PronySeries:
    r"""Relaxation modulus of the material that creeps as `creep`; the inverse of `creep_of`.

    Parameters
    ----------
    creep : CreepSeries
        Creep compliance, ``n`` retarded terms after equal times are merged.

    Returns
    -------
    series : PronySeries
        ``n`` relaxing terms for a solid, ``n + 1`` and an equilibrium of 0 for a liquid. A term whose weight underflows
        to zero is left out.

    Notes
    -----
    :math:`M_i = 1/(\tau_i^2 h'(\tau_i))` with :math:`h' = D_g/x^2 + \sum_j D_j/(\rho_j - x)^2`.

    Examples
    --------
    >>> series = relaxation_of(CreepSeries(instantaneous_compliance=0.5, compliances=[], times=[], fluidity=0.25))
    >>> series.moduli.tolist(), series.times.tolist()
    ([2.0], [2.0])
    """
    merged = creep.merged()
    poles = np.concatenate([[0.0], merged.times])
    weights = np.concatenate([[merged.instantaneous_compliance], merged.compliances])
    roots = secular_roots(poles, weights, merged.fluidity)
    tau = roots.values
    moduli = roots.compliances() / tau
    kept = moduli > 0.0
    long_term = merged.long_term_compliance
    return PronySeries(
        equilibrium=0.0 if long_term is None else 1.0 / long_term,
        moduli=moduli[kept],
        times=tau[kept],
    )
