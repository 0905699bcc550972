r"""Increments of straight temperature cut into pieces, and the reduced time of each piece with its rounding.

The rate :math:`1/a_T` is monotone over a piece, so that the reduced time is convex or concave there.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from matlib.arrays import FloatArray
from matlib.shift.base import ShiftLaw

__all__ = ["Clock", "Pieces", "clock_of", "cut_pieces", "first_pieces", "sums_by_row"]

EPS = float(np.finfo(np.float64).eps)
CLOCK_ROUNDING = 64.0 * EPS
"""Relative rounding of a reduced time, near fourteen digits, whatever the law's closed form or quadrature."""

LONGEST = 1e300
"""Reduced time of a piece at most [s]: no relaxation time is left beyond it, and sums stay finite."""

MOST_PARTS = 8
INSIDE = 1.0 / 64.0  # of a piece, over which the slope of ln a_T at its fast end is taken


@dataclass(slots=True)
class Pieces:
    """Straight pieces of increments, in time order: increment, start and end as fractions of it."""

    row: np.ndarray
    start: FloatArray
    end: FloatArray


@dataclass(slots=True)
class Clock:
    """Reduced time over pieces, each array of shape (pieces,).

    Parameters
    ----------
    share : ndarray
        Part of its increment that a piece takes [-].
    dxi, dxi_error : ndarray
        Reduced time of the piece [s], and the half-width that rounding leaves.
    first, last : ndarray
        Rates at the two ends times the duration [s]; `dxi` lies between them.
    after, after_error : ndarray
        Reduced time of the later pieces of the same increment [s], and its half-width.
    ordered : bool
        Whether every mean rate lay between its end rates, as the law promises between its knots.
    """

    share: FloatArray
    dxi: FloatArray
    dxi_error: FloatArray
    first: FloatArray
    last: FloatArray
    after: FloatArray
    after_error: FloatArray
    ordered: bool

    def taken(self, which: np.ndarray | slice) -> Clock:
        """The chosen pieces alone."""
        return Clock(
            self.share[which],
            self.dxi[which],
            self.dxi_error[which],
            self.first[which],
            self.last[which],
            self.after[which],
            self.after_error[which],
            self.ordered,
        )

    @property
    def bend(self) -> FloatArray:
        """Fraction of each piece after which its two end tangents meet, in [0, 1]."""
        difference = self.last - self.first
        safe = np.where(difference != 0.0, difference, 1.0)
        return np.clip(np.where(difference != 0.0, (self.last - self.dxi) / safe, 0.5), 0.0, 1.0)


def first_pieces(T: FloatArray, knots: tuple[float, ...]) -> Pieces:
    """One piece an increment, cut where the temperature passes a knot of the law.

    Parameters
    ----------
    T : ndarray, shape (n + 1,)
        Temperatures at the ends of the increments [K].
    knots : tuple of float
        [K], ascending.
    """
    low, high = np.minimum(T[:-1], T[1:]), np.maximum(T[:-1], T[1:])
    inner = np.asarray(knots, dtype=np.float64)
    passes = np.searchsorted(inner, high, "left") > np.searchsorted(inner, low, "right")
    plain = np.flatnonzero(~passes)
    rows, starts, ends = [plain], [np.zeros(plain.size)], [np.ones(plain.size)]
    for k in np.flatnonzero(passes):
        between = inner[(inner > low[k]) & (inner < high[k])]
        cuts = (between - T[k]) / (T[k + 1] - T[k])
        edges = np.unique(np.clip(np.concatenate([[0.0], cuts, [1.0]]), 0.0, 1.0))
        rows.append(np.full(edges.size - 1, k))
        starts.append(edges[:-1])
        ends.append(edges[1:])
    row = np.concatenate(rows)
    order = np.argsort(row, kind="stable")
    return Pieces(row[order], np.concatenate(starts)[order], np.concatenate(ends)[order])


def cut_pieces(pieces: Pieces, widths: FloatArray, fair: float) -> Pieces:
    """Cut each piece that is wider than its fair share; its width falls with the cube of the number of parts."""
    with np.errstate(over="ignore"):
        parts = np.where(widths > fair, np.clip(np.ceil(np.cbrt(widths / fair)), 2, MOST_PARTS), 1).astype(np.int64)
    which = np.repeat(np.arange(parts.size), parts)
    place = np.arange(which.size) - np.repeat(np.cumsum(parts) - parts, parts)
    span = pieces.end - pieces.start
    start = pieces.start[which] + span[which] * (place / parts[which])
    end = np.where(
        place + 1 == parts[which], pieces.end[which], pieces.start[which] + span[which] * ((place + 1) / parts[which])
    )
    return Pieces(pieces.row[which], start, end)


def clock_of(law: ShiftLaw, duration: FloatArray, T: FloatArray, pieces: Pieces) -> Clock:
    """Reduced time of pieces.

    Parameters
    ----------
    law : ShiftLaw
    duration : ndarray, shape (n,)
        Of the increments [s].
    T : ndarray, shape (n + 1,)
        Temperatures at the ends of the increments [K].
    pieces : Pieces
    """
    row = pieces.row
    step = T[row + 1] - T[row]
    T_start = T[row] + pieces.start * step  # a fraction below 1 never overshoots the end, whatever rounds
    T_end = np.where(pieces.end == 1.0, T[row + 1], T[row] + pieces.end * step)
    share = pieces.end - pieces.start
    seconds = share * duration[row]
    ln_start, ln_end = law.ln_shift(T_start), law.ln_shift(T_end)
    first, last = np.exp(-ln_start), np.exp(-ln_end)
    low, high = np.minimum(first, last), np.maximum(first, last)
    rounding = _rounding(law, T_start, T_end, ln_start, ln_end)
    mean = law.mean_rate(T_start, T_end)
    ordered = bool(np.all((mean <= high * (1.0 + rounding)) & (mean * (1.0 + rounding) >= low)))
    with np.errstate(over="ignore"):
        dxi, first, last = (np.minimum(rate * seconds, LONGEST) for rate in (np.clip(mean, low, high), first, last))
        dxi_error = dxi * rounding
        after, after_error = (_following(row, values) for values in (dxi, dxi_error))
    return Clock(share, dxi, dxi_error, first, last, after, after_error, ordered)


def _rounding(
    law: ShiftLaw, T_start: FloatArray, T_end: FloatArray, ln_start: FloatArray, ln_end: FloatArray
) -> FloatArray:
    """Relative rounding of the mean rate: of its formula, of ln a_T, and of the temperatures in it, at the fast end."""
    is_first = ln_start <= ln_end
    T, ln_a = np.where(is_first, T_start, T_end), np.where(is_first, ln_start, ln_end)
    reach = INSIDE * np.where(is_first, T_end - T_start, T_start - T_end)
    inside = law.ln_shift(T + reach)
    slope = np.abs(inside - ln_a) / np.where(reach != 0.0, np.abs(reach), 1.0)
    return np.minimum(CLOCK_ROUNDING + EPS * (8.0 * np.abs(ln_a) + 8.0 * T * slope), 1.0)


def _following(row: np.ndarray, values: FloatArray) -> FloatArray:
    """Sum of `values` over the later pieces of the same increment, by sums over twice as many pieces at a time."""
    total = values.copy()
    largest, reach = int(np.bincount(row).max(initial=0)), 1
    while reach < largest:
        total[:-reach] += np.where(row[:-reach] == row[reach:], total[reach:], 0.0)
        reach *= 2
    after = np.zeros_like(values)
    after[:-1] = np.where(row[:-1] == row[1:], total[1:], 0.0)
    return after


def sums_by_row(row: np.ndarray, values: FloatArray, n: int) -> FloatArray:
    """Sum values of pieces over their increments; every increment has a piece."""
    return np.add.reduceat(values, np.searchsorted(row, np.arange(n)), axis=0)
