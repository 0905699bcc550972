r"""Compiled decay and gain of each term, a row of them for every distinct increment; private to `kernels`.

One pass over the terms of a row, which the compiler makes vector instructions of: :math:`e^{-r}` is a power of two times a
polynomial, and the gain comes from that same polynomial.
"""

from __future__ import annotations

import math

import numpy as np

from matlib.arrays import FloatArray
from matlib.compiling import fused
from matlib.packing import AWAY_FROM_0, EXPONENTIAL, FOURS, MIDPOINT, TILE

__all__ = ["weigh"]

LARGEST = 1e300  # keeps r finite; every recursion stands at its limit long before
LONGEST = 709.0  # beyond it exp(-r) is below the normal doubles: the power of two comes out as 0
PER_LN2 = 1.0 / math.log(2.0)
LN2_HIGH = float.fromhex("0x1.62e42fefa3800p-1")  # ln 2, its last bits clear: exact times any power in question ...
LN2_LOW = float.fromhex("0x1.ef35793c76730p-45")  # ... and the rest of it
INTEGER = 1.5 * 2.0**52  # added, it leaves a double rounded to an integer, which its last bits hold
ONE_BITS = np.int64(1023 << 52)  # of 1.0

# expm1(f)/f on |f| <= ln(2)/2, as 1 + f (A0 + f (A1 + ...)): least squares on 200 Chebyshev nodes, relative error 2.2e-17
A0, A1, A2, A3, A4, A5, A6, A7, A8, A9 = (
    0.5000000000000006,
    0.16666666666666677,
    0.04166666666657276,
    0.008333333333321383,
    0.0013888888932622168,
    0.00019841269886700363,
    2.480150417802822e-05,
    2.755724366694653e-06,
    2.7626427414915933e-07,
    2.5109217017939995e-08,
)


@fused
def _split(r: float) -> tuple[float, float, float]:
    r"""Power of two `s`, rest `f` and :math:`p = (e^f - 1)/f` with :math:`e^{-r} = s\,e^f`, :math:`|f| \le \ln(2)/2`."""
    r = min(r, LONGEST)
    shifted = INTEGER - r * PER_LN2
    k = shifted - INTEGER
    f = (-r - k * LN2_HIGH) - k * LN2_LOW
    p = A5 + f * (A6 + f * (A7 + f * (A8 + f * A9)))
    p = 1.0 + f * (A0 + f * (A1 + f * (A2 + f * (A3 + f * (A4 + f * p)))))
    s = np.int64((np.float64(shifted).view(np.int64) << 52) + ONE_BITS).view(np.float64)
    return s, f, p


@fused
def _exponential(dxi: FloatArray, rows: int, terms: FloatArray, tile: int, m: int, weights: FloatArray) -> None:
    """exp(-r), and (1 - exp(-r))/r from the same polynomial: without loss at any r, without a division."""
    for row in range(rows):
        now = dxi[row]
        per_dxi = 1.0 / now if now > 2.3e-308 else 0.0
        w = weights[tile, 2 * TILE * row : 2 * TILE * (row + 1)]
        for i in range(m & FOURS):
            modulus = terms[tile, i + TILE]
            s, f, p = _split(now * terms[tile, i])
            decay = s * (1.0 + f * p)
            near = s == 1.0
            part = p if near else 1.0 - decay
            w[i] = decay
            w[i + TILE] = part * (modulus if near else per_dxi * terms[tile, i + 2 * TILE])


@fused
def _exponential_away_from_0(
    dxi: FloatArray, rows: int, terms: FloatArray, tile: int, m: int, weights: FloatArray
) -> None:
    """The same in fewer steps. In an increment of nothing no gain is asked for: it fills up a pair."""
    for row in range(rows):
        now = dxi[row]
        per_dxi = 1.0 / now if now > 0.0 else 0.0
        w = weights[tile, 2 * TILE * row : 2 * TILE * (row + 1)]
        for i in range(m & FOURS):
            s, f, p = _split(now * terms[tile, i])
            less = s * (f * p)
            w[i] = s + less
            w[i + TILE] = ((1.0 - s) - less) * (per_dxi * terms[tile, i + 2 * TILE])


@fused
def _midpoint(dxi: FloatArray, rows: int, terms: FloatArray, tile: int, m: int, weights: FloatArray) -> None:
    """exp(-r/2) and its square."""
    for row in range(rows):
        half_dxi = 0.5 * dxi[row]
        w = weights[tile, 2 * TILE * row : 2 * TILE * (row + 1)]
        for i in range(m & FOURS):
            s, f, p = _split(half_dxi * terms[tile, i])
            half = s + s * (f * p)
            w[i] = half * half
            w[i + TILE] = terms[tile, i + TILE] * half


@fused
def _rational(
    a: float, b: float, dxi: FloatArray, rows: int, terms: FloatArray, tile: int, m: int, weights: FloatArray
) -> None:
    """(1 - a r)/(1 + b r) and 1/(1 + b r)."""
    for row in range(rows):
        now = dxi[row]
        w = weights[tile, 2 * TILE * row : 2 * TILE * (row + 1)]
        for i in range(m & FOURS):
            r = min(now * terms[tile, i], LARGEST)
            gain = 1.0 / (1.0 + b * r)
            w[i] = (1.0 - a * r) * gain
            w[i + TILE] = terms[tile, i + TILE] * gain


@fused
def weigh(
    kind: int, a: float, b: float, dxi: FloatArray, rows: int, terms: FloatArray, count: int, weights: FloatArray
) -> None:
    r"""Decay and modulus times gain of every term, for some increments.

    Parameters
    ----------
    kind : int
    a, b : float
        See `packing.Form`; not `GIVEN`. `AWAY_FROM_0` is `EXPONENTIAL` where no r of a term is below `packing.SMALLEST`.
    dxi : (>= rows,)
        Reduced time of each increment [s].
    rows : int
        How many of them.
    terms : (tiles, 3 * TILE)
        See `packing.Terms`.
    count : int
    weights : (tiles, >= rows * 2 * TILE)
        Written in place: for each increment the decay of the terms of a tile, then modulus times gain.
    """
    if count == 0:
        return
    for tile in range(terms.shape[0]):
        m = min(TILE, count - tile * TILE)
        if kind == AWAY_FROM_0:
            _exponential_away_from_0(dxi, rows, terms, tile, m, weights)
        elif kind == EXPONENTIAL:
            _exponential(dxi, rows, terms, tile, m, weights)
        elif kind == MIDPOINT:
            _midpoint(dxi, rows, terms, tile, m, weights)
        else:
            _rational(a, b, dxi, rows, terms, tile, m, weights)
