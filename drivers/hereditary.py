r"""Two-sided bounds of the hereditary integral of one exponential over increments of straight temperature.

For an input that runs straight in time over an increment, the integral of :math:`\exp(-(\xi_{end}-\xi(s))/\tau)` needs the
reduced time :math:`\xi(s)` inside. Where the rate :math:`1/a_T` is monotone, :math:`\xi` is convex or concave, and so lies between
its chord and its two end tangents. Both of these make the integral elementary, one too large, one too small; cutting the
increment where they are far apart brings them together with the square of the length.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from drivers.ramp_pieces import EPS, LONGEST, Clock, Pieces, clock_of, cut_pieces, first_pieces, sums_by_row
from matlib.arrays import FloatArray
from matlib.shift.base import ShiftLaw

__all__ = ["Gains", "bracketed_gains"]

LARGEST_WORK = 6_000_000
"""Pieces times terms at most; the bound stays true where this ends the cutting, only wider."""

CLOCK_WORK = 8  # what the clock of a piece costs, in terms

CHUNK = 200_000  # pieces times terms that are worked on at once
ROUNDS = 24
LARGEST_R = 1e300
FORGOTTEN = 800.0  # exp(-800) is zero: a rounding of a longer reduced time cannot matter


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Gains:
    r"""What an increment does to :math:`v_i = \int \exp(-(\xi-\xi')/\tau_i)\,du` and to :math:`q = \int (\xi-\xi')\,du`.

    ``v_end = decay v + gain du`` and ``q_end = q + dxi u + lag du`` [s], each factor with two half-widths: of the bracket,
    which cutting brings down, and of rounding.

    Parameters
    ----------
    dxi, dxi_rounding : ndarray, shape (n,)
        Reduced time of each increment [s].
    decay, decay_rounding, gain, gain_gap, gain_rounding : ndarray, shape (n, m)
    lag, lag_gap, lag_rounding : ndarray, shape (n,)
        [s].
    pieces : Pieces
        What the increments were cut into.
    within_budget : bool
        Whether the sum of weighted half-gaps met the budget; False where the work was too much.
    ordered : bool
        Whether every mean rate lay between its end rates, as the law promises between its knots.
    """

    dxi: FloatArray
    dxi_rounding: FloatArray
    decay: FloatArray
    decay_rounding: FloatArray
    gain: FloatArray
    gain_gap: FloatArray
    gain_rounding: FloatArray
    lag: FloatArray
    lag_gap: FloatArray
    lag_rounding: FloatArray
    pieces: Pieces
    within_budget: bool
    ordered: bool


def bracketed_gains(
    law: ShiftLaw,
    duration: FloatArray,
    T: FloatArray,
    times: FloatArray,
    *,
    importance: FloatArray | None = None,
    lag_importance: FloatArray | None = None,
    budget: float = 1.0,
    pieces: Pieces | None = None,
) -> Gains:
    """Decays and gains of increments, each with guaranteed half-widths.

    Parameters
    ----------
    law : ShiftLaw
        Monotone between its `knots`.
    duration : ndarray, shape (n,)
        [s]; zero is a jump.
    T : ndarray, shape (n + 1,)
        Temperatures at the ends [K], straight between.
    times : ndarray, shape (m,)
        Relaxation times [s at T_ref].
    importance : ndarray, shape (n, m), optional
        What a unit error of each gain is worth; nothing if left out, and no increment is cut but at knots.
    lag_importance : ndarray, shape (n,), optional
        What an error of one second of each lag is worth.
    budget : float, optional
        Sum of weighted half-gaps to aim at. Pieces are cut until it is met, or `LARGEST_WORK` is.
    pieces : Pieces, optional
        Of an earlier call for the same increments, to cut on from.

    Returns
    -------
    Gains

    Raises
    ------
    ShiftRangeError
        If the law has no answer at a temperature.
    """
    n, work = duration.size, times.size + CLOCK_WORK
    weights = np.zeros((n, times.size)) if importance is None else importance
    lag_weights = np.zeros(n) if lag_importance is None else lag_importance
    pieces = first_pieces(T, law.knots) if pieces is None else pieces
    clock = clock_of(law, duration, T, pieces)
    within = False
    for _ in range(ROUNDS):
        widths = _widths(clock, pieces.row, times, weights, lag_weights)
        within = float(widths.sum()) <= budget
        if within or pieces.row.size * work > LARGEST_WORK:
            break
        cut = cut_pieces(pieces, widths, 0.5 * budget / pieces.row.size)
        if cut.row.size * work > 2 * LARGEST_WORK:
            break
        pieces = cut
        clock = clock_of(law, duration, T, pieces)
    return _collected(n, times, pieces, clock, within)


def _mean_exp(x: FloatArray) -> FloatArray:
    """(1 - exp(-x))/x, 1 at 0."""
    positive = np.where(x > 0.0, x, 1.0)
    return np.where(x > 0.0, -np.expm1(-positive) / positive, 1.0)


def _ratio(seconds: FloatArray, times: FloatArray) -> FloatArray:
    """``seconds/times``, shape (pieces, m)."""
    with np.errstate(over="ignore"):
        return np.minimum(seconds[:, np.newaxis] / times, LARGEST_R)


def _bracket(clock: Clock, times: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Share of each piece in the gain of its increment, by the chord and by the two tangents, shape (pieces, m)."""
    weight = clock.share[:, np.newaxis] * np.exp(-_ratio(clock.after, times))
    chord = _mean_exp(_ratio(clock.dxi, times))
    bend = clock.bend
    x_first, x_last = _ratio(clock.first * bend, times), _ratio(clock.last * (1.0 - bend), times)
    p = bend[:, np.newaxis]
    tangents = (1.0 - p) * _mean_exp(x_last) + p * np.exp(-x_last) * _mean_exp(x_first)
    is_straight = (clock.first == clock.last)[:, np.newaxis]
    return weight * chord, weight * np.where(is_straight, chord, tangents)


def _lags(clock: Clock) -> tuple[FloatArray, FloatArray]:
    """Mean of xi_end - xi(s) over each piece alone, by the chord and by the tangents [s], shape (pieces,)."""
    bend, chord = clock.bend, 0.5 * clock.dxi
    late = clock.last * (1.0 - bend)
    tangents = (1.0 - bend) * 0.5 * late + bend * (late + 0.5 * clock.first * bend)
    return chord, np.where(clock.first == clock.last, chord, tangents)


def _widths(
    clock: Clock, row: np.ndarray, times: FloatArray, importance: FloatArray, lag_importance: FloatArray
) -> FloatArray:
    """Weighted half-gap of each piece, shape (pieces,)."""
    chord, tangents = _lags(clock)
    widths = clock.share * np.abs(chord - tangents) * lag_importance[row]
    bent = np.flatnonzero(clock.first != clock.last)
    size = max(1, CHUNK // max(times.size, 1))
    for start in range(0, bent.size, size):
        some = bent[start : start + size]
        by_chord, by_tangents = _bracket(clock.taken(some), times)
        widths[some] += np.einsum("ij,ij->i", np.abs(by_chord - by_tangents), importance[row[some]])
    return widths


def _averaged(chord: FloatArray, tangents: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Value and half-gap: the chord errs twice as much as the tangents, the other way; the half-gap reaches both."""
    return (chord + 2.0 * tangents) / 3.0, np.abs(chord - tangents) * (2.0 / 3.0)


def _gains_of(clock: Clock, times: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Share of each piece in the gain of its increment, its half-gap and its rounding, shape (pieces, m)."""
    chord, tangents = _bracket(clock, times)
    value, gap = _averaged(chord, tangents)
    own, later = _ratio(clock.dxi_error, times), _ratio(clock.after_error, times)
    relative = np.where(clock.dxi > 0.0, clock.dxi_error / np.where(clock.dxi > 0.0, clock.dxi, 1.0), 0.0)
    moved = np.minimum(own, relative[:, np.newaxis]) + np.minimum(later, FORGOTTEN)
    return value, gap, np.maximum(chord, tangents) * (moved + 8.0 * EPS)


def _collected(n: int, times: FloatArray, pieces: Pieces, clock: Clock, within: bool) -> Gains:
    gain, gap, rounding = np.empty((n, times.size)), np.empty((n, times.size)), np.empty((n, times.size))
    bounds = np.searchsorted(pieces.row, np.arange(n + 1))
    size = max(1, CHUNK // max(times.size, 1))
    k = 0
    while k < n:  # whole increments at a time, to bound memory
        stop = min(n, max(k + 1, int(np.searchsorted(bounds, bounds[k] + size, "right")) - 1))
        part = slice(int(bounds[k]), int(bounds[stop]))
        sums = (sums_by_row(pieces.row[part] - k, v, stop - k) for v in _gains_of(clock.taken(part), times))
        gain[k:stop], gap[k:stop], rounding[k:stop] = sums
        k = stop
    summing = EPS * np.diff(bounds)  # one rounding a piece at most
    lag, lag_gap = _averaged(*_lags(clock))
    with np.errstate(over="ignore"):
        dxi, dxi_error, lag, lag_gap, lag_error = (
            np.minimum(sums_by_row(pieces.row, values, n), LONGEST)
            for values in (
                clock.dxi,
                clock.dxi_error,
                clock.share * (lag + clock.after),
                clock.share * lag_gap,
                clock.share * (clock.dxi_error + clock.after_error),
            )
        )
    dxi_error += summing * dxi
    decay = np.exp(-_ratio(dxi, times))
    return Gains(
        dxi=dxi,
        dxi_rounding=dxi_error,
        decay=decay,
        decay_rounding=decay * (2.0 * EPS + np.minimum(_ratio(dxi_error, times), FORGOTTEN)),
        gain=gain,
        gain_gap=gap,
        gain_rounding=rounding + summing[:, np.newaxis] * gain,
        lag=lag,
        lag_gap=lag_gap,
        lag_rounding=lag_error + (8.0 * EPS + summing) * lag,
        pieces=pieces,
        within_budget=within,
        ordered=clock.ordered,
    )
