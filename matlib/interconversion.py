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
from matlib.prony import CreepSeries, PronySeries

__all__ = ["SecularRoots", "creep_of", "relaxation_of", "secular_roots"]

_TINY = float(np.finfo(np.float64).tiny)
_HUGE = 1e300


class SecularRoots(NamedTuple):
    """Roots ``base + offset`` of a secular equation, ascending.

    Parameters
    ----------
    base : ndarray, shape (m,)
        The pole nearest to each root.
    offset : ndarray, shape (m,)
        Signed distance of the root from that pole, to full relative precision, however small.
    """

    base: FloatArray
    offset: FloatArray

    @property
    def values(self) -> FloatArray:
        """The roots as plain numbers, shape (m,); a root very near to its pole rounds to it."""
        return self.base + self.offset

    def distances(self, poles: FloatArray) -> FloatArray:
        """``poles - root`` without cancellation, shape (m, n), for the poles of the equation itself."""
        return poles - self.base[:, np.newaxis] - self.offset[:, np.newaxis]


def secular_roots(poles: FloatArray, weights: FloatArray, constant: float) -> SecularRoots:
    r"""All roots of :math:`h(x) = c + \sum_j u_j/(p_j - x)` that lie above the first pole.

    Parameters
    ----------
    poles : ndarray, shape (n,)
        Poles :math:`p_j`, strictly ascending, ``>= 0``.
    weights : ndarray, shape (n,)
        Weights :math:`u_j`, ``> 0``.
    constant : float
        Constant :math:`c`, ``>= 0``.

    Returns
    -------
    roots : SecularRoots
        One root in each gap, and one beyond the last pole where ``constant > 0``.

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
        return SecularRoots(poles, poles)
    total = float(weights.sum())
    u = weights / total
    c = constant / total

    gaps = np.diff(poles)
    middle = SecularRoots(poles[:-1], 0.5 * gaps)
    rises = c + (1.0 / middle.distances(poles)) @ u >= 0.0  # the root is in the lower half of its gap
    base = np.where(rises, poles[:-1], poles[1:])
    sign = np.where(rises, 1.0, -1.0)
    reach = 0.5 * gaps
    if c > 0.0:
        # h(x) >= c - 1/(x - p_n) beyond the last pole p_n, so the root is at most 1/c away from it
        base = np.append(base, poles[-1])
        sign = np.append(sign, 1.0)
        reach = np.append(reach, min(1.0 / max(c, 1.0 / _HUGE), _HUGE))

    low = np.full(base.size, _TINY).view(np.int64)
    high = np.maximum(reach, _TINY).view(np.int64)
    from_base = SecularRoots(base, np.zeros(base.size)).distances(poles)
    with np.errstate(over="ignore"):
        while np.any(high - low > 1):
            trial = low + (high - low) // 2
            offset = sign * trial.view(np.float64)
            h = c + (1.0 / (from_base - offset[:, np.newaxis])) @ u
            too_near = sign * h < 0.0
            low = np.where(too_near, trial, low)
            high = np.where(too_near, high, trial)
    return SecularRoots(base, sign * high.view(np.float64))


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
    :math:`\phi = 1/\sum_j M_j\tau_j` for a liquid. Every sum is of positive numbers.

    Examples
    --------
    >>> creep = creep_of(PronySeries(equilibrium=1.0, moduli=[2.0], times=[5.0]))
    >>> creep.times.round(12).tolist(), creep.compliances.round(12).tolist()
    ([15.0], [0.666666666667])
    """
    merged = series.merged()
    weights = merged.moduli * merged.times
    roots = secular_roots(merged.times, weights, merged.equilibrium)
    rho = roots.values
    compliances = rho / _squared_sum(roots, merged.times, weights)
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
    moduli = 1.0 / _squared_sum(roots, poles, weights)
    kept = moduli > 0.0
    long_term = merged.long_term_compliance
    return PronySeries(
        equilibrium=0.0 if long_term is None else 1.0 / long_term,
        moduli=moduli[kept],
        times=roots.values[kept],
    )


def _squared_sum(roots: SecularRoots, poles: FloatArray, weights: FloatArray) -> FloatArray:
    """``x^2 h'(x)`` at the roots, shape (m,), where ``h'`` is the sum of ``u_j/(p_j - x)^2``."""
    with np.errstate(over="ignore"):
        ratios = roots.values[:, np.newaxis] / roots.distances(poles)
        return (ratios * ratios) @ weights
