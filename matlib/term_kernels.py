r"""Compiled loops over the terms of a series, private to `kernels`: what they carry over increments, tile by tile.

``h[tile, i + c * TILE]`` is the relaxing stress of term `i` in component `c`; weights lie as `weight_kernels.weigh` leaves
them: `ROW` numbers an increment of a tile, decay and modulus times gain.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from matlib.arrays import FloatArray
from matlib.compiling import summing
from matlib.packing import FOURS, TILE

__all__ = ["ROW", "carry_and_look", "carry_mean", "carry_pairs", "forget", "look_mean", "stiffness"]

IntArray = NDArray[np.int64]

NEGLIGIBLE = 1e-290  # a relaxing stress below it [Pa] is none: never let it linger among the slow denormal numbers
ROW = 2 * TILE
"""Weights of one increment in a tile."""

T1, T2, T3, T4, T5 = TILE, 2 * TILE, 3 * TILE, 4 * TILE, 5 * TILE


@summing
def carry_pairs(
    h: FloatArray,
    count: int,
    weights: FloatArray,
    pairs: IntArray,
    used: int,
    e: FloatArray,
    first: int,
    total: FloatArray,
) -> None:
    """Take `count` terms over pairs of increments `e`, and add their sums at the ends to `total` from row `first` on.

    ``pairs`` says which pair of rows of `weights` belongs to each of the `used` pairs. Two increments at once halve what is
    read and written of `h`.
    """
    for tile in range(h.shape[0]):
        m, q = min(TILE, count - tile * TILE), h[tile]
        for k in range(used):
            a, b, start = 2 * k, 2 * k + 1, 2 * ROW * pairs[k]
            x, y, pair = first + a, first + b, weights[tile, start : start + 2 * ROW]
            e0, e1, e2, e3, e4, e5 = e[a, 0], e[a, 1], e[a, 2], e[a, 3], e[a, 4], e[a, 5]
            f0, f1, f2, f3, f4, f5 = e[b, 0], e[b, 1], e[b, 2], e[b, 3], e[b, 4], e[b, 5]
            s0 = s1 = s2 = s3 = s4 = s5 = 0.0
            t0 = t1 = t2 = t3 = t4 = t5 = 0.0
            for i in range(m & FOURS):
                d, g = pair[i], pair[i + T1]
                d2, g2 = pair[i + T2], pair[i + T3]
                v = d * q[i] + g * e0
                w = d2 * v + g2 * f0
                q[i] = w
                s0 += v
                t0 += w
                v = d * q[i + T1] + g * e1
                w = d2 * v + g2 * f1
                q[i + T1] = w
                s1 += v
                t1 += w
                v = d * q[i + T2] + g * e2
                w = d2 * v + g2 * f2
                q[i + T2] = w
                s2 += v
                t2 += w
                v = d * q[i + T3] + g * e3
                w = d2 * v + g2 * f3
                q[i + T3] = w
                s3 += v
                t3 += w
                v = d * q[i + T4] + g * e4
                w = d2 * v + g2 * f4
                q[i + T4] = w
                s4 += v
                t4 += w
                v = d * q[i + T5] + g * e5
                w = d2 * v + g2 * f5
                q[i + T5] = w
                s5 += v
                t5 += w
            total[x, 0] += s0
            total[x, 1] += s1
            total[x, 2] += s2
            total[x, 3] += s3
            total[x, 4] += s4
            total[x, 5] += s5
            total[y, 0] += t0
            total[y, 1] += t1
            total[y, 2] += t2
            total[y, 3] += t3
            total[y, 4] += t4
            total[y, 5] += t5


@summing
def carry_and_look(
    h: FloatArray, count: int, weights: FloatArray, row: int, next_row: int, e: FloatArray, kept: FloatArray
) -> None:
    """Take `count` terms over the increment `e`; `kept` is what the next one will keep of their sums."""
    e0, e1, e2, e3, e4, e5 = e[0], e[1], e[2], e[3], e[4], e[5]
    kept[:] = 0.0
    for tile in range(h.shape[0]):
        m, q = min(TILE, count - tile * TILE), h[tile]
        now = weights[tile, ROW * row : ROW * (row + 1)]
        then = weights[tile, ROW * next_row : ROW * (next_row + 1)]
        s0 = s1 = s2 = s3 = s4 = s5 = 0.0
        for i in range(m & FOURS):
            d, g, d2 = now[i], now[i + T1], then[i]
            v = d * q[i] + g * e0
            q[i] = v
            s0 += d2 * v
            v = d * q[i + T1] + g * e1
            q[i + T1] = v
            s1 += d2 * v
            v = d * q[i + T2] + g * e2
            q[i + T2] = v
            s2 += d2 * v
            v = d * q[i + T3] + g * e3
            q[i + T3] = v
            s3 += d2 * v
            v = d * q[i + T4] + g * e4
            q[i + T4] = v
            s4 += d2 * v
            v = d * q[i + T5] + g * e5
            q[i + T5] = v
            s5 += d2 * v
        kept[0] += s0
        kept[1] += s1
        kept[2] += s2
        kept[3] += s3
        kept[4] += s4
        kept[5] += s5


@summing
def carry_mean(p: FloatArray, count: int, weights: FloatArray, row: int, volume: float) -> float:
    """Take the relaxing mean stresses over an increment of volume strain; their sum at its end."""
    total = 0.0
    for tile in range(p.shape[0]):
        w, q = weights[tile, ROW * row : ROW * (row + 1)], p[tile]
        for i in range(min(TILE, count - tile * TILE) & FOURS):
            v = w[i] * q[i] + w[i + T1] * volume
            q[i] = v
            total += v
    return total


@summing
def look_mean(p: FloatArray, count: int, weights: FloatArray, row: int) -> float:
    """What an increment keeps of the relaxing mean stresses."""
    total = 0.0
    for tile in range(p.shape[0]):
        w = weights[tile, ROW * row : ROW * (row + 1)]
        for i in range(min(TILE, count - tile * TILE) & FOURS):
            total += w[i] * p[tile, i]
    return total


@summing
def stiffness(equilibrium: float, count: int, weights: FloatArray, row: int) -> float:
    """Stress a unit strain of an increment: the equilibrium modulus and what each term gains."""
    total = equilibrium
    for tile in range(weights.shape[0]):
        w = weights[tile, ROW * row : ROW * (row + 1)]
        for i in range(min(TILE, count - tile * TILE) & FOURS):
            total += w[i + T1]
    return total


@summing
def forget(h: FloatArray) -> None:
    """Set to zero what has relaxed beyond all numbers that matter."""
    for tile in range(h.shape[0]):
        for i in range(h.shape[1]):
            h[tile, i] = 0.0 if abs(h[tile, i]) < NEGLIGIBLE else h[tile, i]
