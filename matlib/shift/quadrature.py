"""The mean rate over temperature ramps by adaptive Gauss quadrature, for laws without a closed form."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from matlib.arrays import FloatArray
from matlib.errors import ParameterError
from matlib.shift.domain import LARGEST_LN_RATE
from matlib.shift.gauss import unit_gauss

__all__ = ["mean_rate_by_quadrature"]

_TOLERANCE = 1e-14  # of the ramp's total; the sum of halves is far better than its difference from the whole
_NOISE = 8.0 * np.finfo(np.float64).eps  # rounding of ln a_T, which a relative rate inherits
_T_NOISE = np.finfo(np.float64).eps  # rounding of T, which moves ln a_T by the slope of the law
_COUNT = 15
_STEEP = 40.0  # an interval over which the rate changes more than exp(40)-fold may hide a peak between its nodes
_DEPTH = 60

LnShift = Callable[[FloatArray], FloatArray]


def mean_rate_by_quadrature(
    ln_shift: LnShift, knots: Sequence[float], T_start: ArrayLike, T_end: ArrayLike
) -> FloatArray:
    r"""Mean over temperature of :math:`1/a_T` for straight ramps.

    Parameters
    ----------
    ln_shift : callable
        :math:`\ln a_T` of an array of temperatures [K]; smooth and monotone between the knots.
    knots : sequence of float
        Temperatures [K], ascending, at which ramps are split.
    T_start, T_end : array_like
        Temperature at the two ends of each ramp [K]; they broadcast.

    Returns
    -------
    rate : ndarray
        Mean of :math:`1/a_T`, of the broadcast shape; the point rate where both ends are equal.

    Raises
    ------
    ParameterError
        If :math:`1/a_T` overflows on a ramp.

    Notes
    -----
    Gauss-Legendre with 15 nodes against two halves, on all open intervals at once; an interval is closed when the two
    agree to 1e-14 of its ramp's total. Rates are taken relative to the largest of their ramp, so that nothing
    overflows on the way and a quench underflows. Unchanged when the ends are swapped.

    Examples
    --------
    >>> float(mean_rate_by_quadrature(lambda T: np.log(T), (), 1.0, np.e).round(12))  # the mean of 1/T, 1/(e - 1)
    0.581976706869
    """
    start, end = np.broadcast_arrays(np.asarray(T_start, dtype=np.float64), np.asarray(T_end, dtype=np.float64))
    low, high = np.minimum(start, end).ravel(), np.maximum(start, end).ravel()
    ln_low, ln_high = ln_shift(low), ln_shift(high)
    owner, edges = _split_at_knots(low, high, np.asarray(knots, dtype=np.float64))
    ln_edges = ln_shift(edges.ravel()).reshape(edges.shape)
    ln_fastest = np.minimum(ln_low, ln_high)
    np.minimum.at(ln_fastest, owner, ln_edges.min(axis=1))
    if ln_fastest.size and not ln_fastest.min() >= -LARGEST_LN_RATE:
        raise ParameterError("ln_shift", f">= -{LARGEST_LN_RATE:.0f} on a ramp", float(ln_fastest.min()))
    total = np.where(low == high, 1.0, 0.0)
    total += _adapt(ln_shift, low, high, owner, edges, ln_edges, ln_fastest)
    return np.asarray(np.exp(-ln_fastest) * total).reshape(start.shape)


def _split_at_knots(low: FloatArray, high: FloatArray, knots: FloatArray) -> tuple[NDArray[np.intp], FloatArray]:
    """Intervals of all ramps: the ramp that owns each, and its two ends, shape (intervals, 2)."""
    first = np.searchsorted(knots, low, side="right")
    last = np.searchsorted(knots, high, side="left")
    count = np.where(high > low, np.maximum(last - first, 0) + 1, 0)
    owner = np.repeat(np.arange(low.size), count)
    place = np.arange(owner.size) - np.repeat(np.cumsum(count) - count, count)  # 0, 1, ... within its ramp
    padded = np.concatenate((knots, [np.inf]))
    left = np.where(place == 0, low[owner], padded[first[owner] + place - 1])
    right = np.where(place == count[owner] - 1, high[owner], padded[np.minimum(first[owner] + place, knots.size)])
    return owner, np.stack((left, right), axis=1)


def _adapt(
    ln_shift: LnShift,
    low: FloatArray,
    high: FloatArray,
    owner: NDArray[np.intp],
    edges: FloatArray,
    ln_edges: FloatArray,
    ln_fastest: FloatArray,
) -> FloatArray:
    """Mean rate of each ramp relative to its fastest."""
    nodes, weights = unit_gauss(_COUNT)

    def estimate(owner: NDArray[np.intp], left: FloatArray, right: FloatArray) -> FloatArray:
        T = left[:, None] + (right - left)[:, None] * nodes
        relative = np.exp(
            np.minimum(ln_fastest[owner][:, None] - ln_shift(T.ravel()).reshape(T.shape), LARGEST_LN_RATE)
        )
        return (relative @ weights) * ((right - left) / (high - low)[owner])

    closed = np.zeros(low.size)
    left, right, ln_left, ln_right = edges[:, 0], edges[:, 1], ln_edges[:, 0], ln_edges[:, 1]
    with np.errstate(under="ignore"):
        whole = estimate(owner, left, right)
        for depth in range(_DEPTH):
            if owner.size == 0:
                break
            centre = 0.5 * (left + right)
            ln_centre = ln_shift(centre)
            lower, upper = estimate(owner, left, centre), estimate(owner, centre, right)
            halves = lower + upper
            total = closed + np.bincount(owner, halves, minlength=low.size)
            largest = np.exp(ln_fastest[owner] - np.minimum(ln_left, ln_right)) * (right - left) / (high - low)[owner]
            moved = np.abs(ln_left - ln_right) * (right / np.maximum(right - left, np.spacing(right))) * _T_NOISE
            noise = (_NOISE * (1.0 + np.maximum(np.abs(ln_left), np.abs(ln_right))) + moved) * halves
            agree = np.abs(whole - halves) <= _TOLERANCE * total[owner] + noise
            gentle = (np.abs(ln_left - ln_right) <= _STEEP) | (largest <= 0.01 * _TOLERANCE * total[owner])
            done = (agree & gentle) | (depth == _DEPTH - 1)
            closed += np.bincount(owner[done], halves[done], minlength=low.size)
            more = ~done
            left, centre, right = left[more], centre[more], right[more]
            ln_left, ln_centre, ln_right = ln_left[more], ln_centre[more], ln_right[more]
            owner = np.concatenate((owner[more], owner[more]))
            whole = np.concatenate((lower[more], upper[more]))
            left, right = np.concatenate((left, centre)), np.concatenate((centre, right))
            ln_left, ln_right = np.concatenate((ln_left, ln_centre)), np.concatenate((ln_centre, ln_right))
    return closed
