r"""Closed form of the mean rate over a temperature ramp, for WLF, VFT and Arrhenius alike.

With `u` the temperature above the pole, all three have :math:`1/a_T \propto \exp(-B/u)`, and
:math:`\int \exp(-B/u)\,du = u E_2(B/u)` with the exponential integral of order two (M. Abramowitz, I. A. Stegun,
Handbook of Mathematical Functions (1964), ch. 5).
"""

from __future__ import annotations

import numpy as np

from matlib.arrays import FloatArray
from matlib.shift.gauss import unit_gauss

__all__ = ["mean_rate_below", "scaled_exponential_integral"]


_NODES, _FEW_NODES = 14, 5
_SHORT = 0.25  # a ramp shorter than this part of the hot end's height above the pole ...
_GENTLE = 2.0  # ... over which ln a_T changes less than this: the difference would cancel, 14 nodes are exact
_TINY, _FLAT = 0.02, 0.1  # below these in place of the two above, 5 nodes are exact: their error is under 1e-18
_SERIES_TERMS = 20  # 1/(20 * 20!) < 1e-19 at z = 1
_PIECES = (  # up to this z, so many terms of the continued fraction (0: the series); exp(-4 sqrt(terms z)) < 1e-16
    (1.0, 0),
    (4.0, 90),
    (25.0, 26),
    (np.inf, 8),
)
_EULER = 0.5772156649015328606


def _by_series(z: FloatArray) -> FloatArray:
    """E2 scaled by exp(z) for 0 <= z < 1: 1 - z exp(z) E1(z), E1 by its power series (A&S 5.1.11)."""
    total = np.zeros_like(z)
    factorial = np.cumprod(np.arange(1.0, _SERIES_TERMS + 1.0))
    for k in range(_SERIES_TERMS, 0, -1):
        total = z * (total + (-1.0) ** (k + 1) / (k * factorial[k - 1]))
    return 1.0 - z * np.exp(z) * (total - _EULER - np.log(np.maximum(z, 1e-300)))


def _by_fraction(z: FloatArray, terms: int) -> FloatArray:
    """E2 scaled by exp(z), by its continued fraction in Jacobi form (A&S 5.1.22, contracted), from the tail up."""
    t = z + (2.0 + 2.0 * terms)
    for k in range(terms, 0, -1):
        t = z + 2.0 * k - k * (k + 1.0) / t
    return 1.0 / t


def scaled_exponential_integral(z: FloatArray) -> FloatArray:
    r""":math:`e^z E_2(z)`, which falls from 1 at `z` = 0 like :math:`1/(z + 2)`.

    Parameters
    ----------
    z : ndarray
        ``>= 0``.

    Returns
    -------
    g : ndarray
        Of the same shape, in (0, 1].

    Examples
    --------
    >>> scaled_exponential_integral(np.array([0.0, 1.0])).round(6)
    array([1.      , 0.403653])
    """
    g = np.empty_like(z)
    start = 0.0
    for end, terms in _PIECES:
        here = (z >= start) & (z <= end)
        if here.any():
            g[here] = _by_fraction(z[here], terms) if terms else _by_series(z[here])
        start = end
    return g


def mean_rate_below(u_cold: FloatArray, u_hot: FloatArray, B: float | FloatArray) -> FloatArray:
    r"""Mean of :math:`\exp(B/u_{hot} - B/u)` over `u` from `u_cold` to `u_hot`.

    Parameters
    ----------
    u_cold, u_hot : ndarray
        Temperature above the pole at the two ends [K], ``0 < u_cold <= u_hot``; of one shape.
    B : float or ndarray
        Constant of the law [K], ``> 0``; broadcasts to that shape.

    Returns
    -------
    mean : ndarray
        The mean rate as a part of the rate at the hot end, in (0, 1]; exactly 1 where both ends are equal.

    Notes
    -----
    The difference :math:`u_{hot} g(B/u_{hot}) - u_{cold} e^{-d} g(B/u_{cold})`, with `d` the change of
    :math:`\ln a_T`, loses no more than a digit where the ramp is long or steep; elsewhere 14-node Gauss quadrature
    takes its place, exact to rounding there (5-node, where all ramps are gentle). The hot end is the factor taken out, so that a quench underflows.
    """
    shape = u_hot.shape
    a, b, B = u_cold.ravel(), u_hot.ravel(), np.broadcast_to(B, shape).ravel()
    with np.errstate(over="ignore", under="ignore"):
        length = b - a
        d = B / a * (length / b)
        near = (length < _SHORT * b) & (d < _GENTLE)
        mean = np.empty_like(b)
        if near.any():
            few = bool(np.all(length[near] < _TINY * b[near]) and np.max(d[near]) < _FLAT)
            mean[near] = _by_nodes(length[near], b[near], B[near], _FEW_NODES if few else _NODES)
        far = ~near
        if far.any():
            a, b, B, length = a[far], b[far], B[far], length[far]
            cold = a * np.exp(-d[far]) * scaled_exponential_integral(B / a)
            mean[far] = (b * scaled_exponential_integral(B / b) - cold) / length
    return mean.reshape(shape)


def _by_nodes(length: FloatArray, hot: FloatArray, B: FloatArray, count: int) -> FloatArray:
    total = np.zeros_like(hot)
    slope = B / hot
    for node, weight in zip(*unit_gauss(count), strict=True):
        below = node * length
        total += weight * np.expm1(-slope * (below / (hot - below)))
    return 1.0 + total
