r"""Two-sided bounds of the hereditary integral of one exponential over increments of straight temperature.

For an input that runs straight in time over an increment, the integral of :math:`\exp(-(\xi_{end}-\xi(s))/\tau)` needs the
reduced time :math:`\xi(s)` inside. Where the rate :math:`1/a_T` is monotone, :math:`\xi` is convex or concave, and so lies between
its chord and its two end tangents. Both of these make the integral elementary, one too large, one too small; cutting the
increment where they are far apart brings them together with the square of the length.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from matlib.arrays import FloatArray
from matlib.shift.base import ShiftLaw

__all__ = ["Gains", "bracketed_gains"]

EPS = float(np.finfo(np.float64).eps)
CLOCK_ROUNDING = 64.0 * EPS
"""Relative rounding of a reduced time itself: thirteen to fourteen digits, whatever the law's closed form or quadrature."""

LARGEST_WORK = 6_000_000
"""Subdivisions times terms at most; the bound stays true where this ends the subdivision, only wider."""

CHUNK = 400_000
ROUNDS = 24


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Gains:
    r"""What an increment does to :math:`v_i = \int \exp(-(\xi-\xi')/\tau_i)\,du` and to :math:`q = \int (\xi-\xi')\,du`.

    Parameters
    ----------
    dxi : ndarray, shape (n,)
        Reduced time of each increment [s].
    clock_error : ndarray, shape (n,)
        Relative rounding of `dxi`, the conditioning of the shift law included.
    decay, decay_error, gain, gain_error : ndarray, shape (n, m)
        ``v_end = decay v + gain du``, each with its half-width.
    lag, lag_error : ndarray, shape (n,)
        ``q_end = q + dxi u + lag du`` [s], with its half-width.
    pieces : int
        Pieces that the increments were cut into.
    ordered : bool
        Whether every mean rate lay between its end rates, as the law promises between its knots.
    """

    dxi: FloatArray
    clock_error: FloatArray
    decay: FloatArray
    decay_error: FloatArray
    gain: FloatArray
    gain_error: FloatArray
    lag: FloatArray
    lag_error: FloatArray
    pieces: int
    ordered: bool


@dataclass(slots=True)
class _Pieces:
    """Straight pieces of increments, in time order: increment, start and end as fractions of it."""

    row: np.ndarray
    start: FloatArray
    end: FloatArray


@dataclass(slots=True)
class _Clock:
    """Reduced time over pieces: its length, the end rates times the duration, and what follows in the same increment."""

    share: FloatArray
    dxi: FloatArray
    first: FloatArray
    last: FloatArray
    after: FloatArray


def _mean_exp(x: FloatArray) -> FloatArray:
    """(1 - exp(-x))/x, 1 at 0."""
    positive = np.where(x > 0.0, x, 1.0)
    return np.where(x > 0.0, -np.expm1(-positive) / positive, 1.0)


def _initial(T: FloatArray, knots: tuple[float, ...]) -> _Pieces:
    """One piece an increment, cut where the temperature passes a knot of the law."""
    rows, starts, ends = [], [], []
    low, high = np.minimum(T[:-1], T[1:]), np.maximum(T[:-1], T[1:])
    inner = np.asarray(knots)
    has_knot = np.zeros(low.size, dtype=np.bool_)
    if inner.size:
        has_knot = np.searchsorted(inner, high, "left") > np.searchsorted(inner, low, "right")
    plain = np.flatnonzero(~has_knot)
    rows.append(plain)
    starts.append(np.zeros(plain.size))
    ends.append(np.ones(plain.size))
    for k in np.flatnonzero(has_knot):
        between = inner[(inner > low[k]) & (inner < high[k])]
        cuts = np.sort((between - T[k]) / (T[k + 1] - T[k]))
        edges = np.unique(np.clip(np.concatenate([[0.0], cuts, [1.0]]), 0.0, 1.0))
        rows.append(np.full(edges.size - 1, k))
        starts.append(edges[:-1])
        ends.append(edges[1:])
    row = np.concatenate(rows)
    order = np.argsort(row, kind="stable")
    return _Pieces(row[order], np.concatenate(starts)[order], np.concatenate(ends)[order])


def _clock(law: ShiftLaw, duration: FloatArray, T: FloatArray, pieces: _Pieces) -> tuple[_Clock, bool]:
    row = pieces.row
    step = T[1:] - T[:-1]
    T_start, T_end = T[row] + pieces.start * step[row], T[row] + pieces.end * step[row]
    T_end = np.where(pieces.end == 1.0, T[row + 1], T_end)
    share = pieces.end - pieces.start
    seconds = share * duration[row]
    first, last = np.exp(-law.ln_shift(T_start)), np.exp(-law.ln_shift(T_end))
    mean = law.mean_rate(T_start, T_end)
    low, high = np.minimum(first, last), np.maximum(first, last)
    slack = 1.0 + CLOCK_ROUNDING + 4.0 * EPS * np.abs(np.log(np.maximum(high, 1e-300)))
    ordered = bool(np.all((mean <= high * slack) & (mean * slack >= low)))
    mean = np.clip(mean, low, high)
    dxi = mean * seconds
    total = np.cumsum(dxi[::-1])[::-1]
    # What follows inside the same increment: sums from the back, less what belongs to later increments.
    after = _following(row, dxi) if row.size else total
    return _Clock(share, dxi, first * seconds, last * seconds, after), ordered


def _following(row: np.ndarray, dxi: FloatArray) -> FloatArray:
    """Sum of `dxi` over the later pieces of the same increment."""
    after = np.zeros_like(dxi)
    counts = np.bincount(row)
    if counts.max(initial=0) <= 1:
        return after
    ends = np.cumsum(counts)
    for k in np.flatnonzero(counts > 1):
        part = slice(ends[k] - counts[k], ends[k])
        after[part][:-1] = np.cumsum(dxi[part][::-1])[::-1][1:]
    return after


def _bracket(clock: _Clock, times: FloatArray, part: slice) -> tuple[FloatArray, FloatArray]:
    """Share of each piece in the gain of its increment, by the chord and by the two tangents, shape (pieces, m)."""
    dxi, first, last = (a[part, np.newaxis] for a in (clock.dxi, clock.first, clock.last))
    weight = clock.share[part, np.newaxis] * np.exp(-clock.after[part, np.newaxis] / times)
    chord = _mean_exp(dxi / times)
    # The tangents meet after a fraction p of the piece.
    bend = last - first
    p = np.clip(np.where(bend != 0.0, (last - dxi) / np.where(bend != 0.0, bend, 1.0), 0.5), 0.0, 1.0)
    x_last, x_first = last * (1.0 - p) / times, first * p / times
    tangents = (1.0 - p) * _mean_exp(x_last) + p * np.exp(-x_last) * _mean_exp(x_first)
    return weight * chord, weight * np.where(bend != 0.0, tangents, chord)


def _lags(clock: _Clock) -> tuple[FloatArray, FloatArray]:
    """Share of each piece in the mean of xi_end - xi(s), by the chord and by the tangents, shape (pieces,)."""
    bend = clock.last - clock.first
    safe = np.where(bend != 0.0, bend, 1.0)
    p = np.clip(np.where(bend != 0.0, (clock.last - clock.dxi) / safe, 0.5), 0.0, 1.0)
    chord = 0.5 * clock.dxi
    after_bend = clock.last * (1.0 - p)
    tangents = (1.0 - p) * 0.5 * after_bend + p * (after_bend + 0.5 * clock.first * p)
    tangents = np.where(bend != 0.0, tangents, chord)
    return clock.share * (chord + clock.after), clock.share * (tangents + clock.after)


def _widths(clock: _Clock, row: np.ndarray, times: FloatArray, importance: FloatArray) -> FloatArray:
    """Weighted half-gap of each piece, shape (pieces,)."""
    widths = np.zeros(row.size)
    size = max(1, CHUNK // max(times.size, 1))
    bent = np.flatnonzero(clock.first != clock.last)
    for start in range(0, bent.size, size):
        some = bent[start : start + size]
        chosen = _Clock(*(getattr(clock, name)[some] for name in ("share", "dxi", "first", "last", "after")))
        chord, tangents = _bracket(chosen, times, slice(None))
        widths[some] = np.einsum("ij,ij->i", np.abs(chord - tangents), importance[row[some]])
    return widths


def _cut(pieces: _Pieces, widths: FloatArray, fair: float) -> _Pieces:
    """Cut each piece that is wider than its fair share; its width falls with the cube of the number of parts."""
    parts = np.where(widths > fair, np.clip(np.ceil(np.cbrt(widths / fair)), 2, 8), 1).astype(np.int64)
    which = np.repeat(np.arange(parts.size), parts)
    place = np.arange(which.size) - np.repeat(np.cumsum(parts) - parts, parts)
    span = pieces.end - pieces.start
    edge = place / parts[which]
    start = pieces.start[which] + span[which] * edge
    last = place + 1 == parts[which]
    end = np.where(last, pieces.end[which], pieces.start[which] + span[which] * ((place + 1) / parts[which]))
    return _Pieces(pieces.row[which], start, end)


def bracketed_gains(
    law: ShiftLaw,
    duration: FloatArray,
    T: FloatArray,
    times: FloatArray,
    importance: FloatArray,
    budget: float,
) -> Gains:
    """Decays and gains of increments, each with a guaranteed half-width.

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
    importance : ndarray, shape (n, m)
        What a unit error of each gain is worth.
    budget : float
        Sum of weighted half-gaps to aim at. Pieces are cut until it is met, or `LARGEST_WORK` is.

    Returns
    -------
    Gains

    Raises
    ------
    ShiftRangeError
        If the law has no answer at a temperature.
    """
    n, m = duration.size, times.size
    pieces = _initial(T, law.knots)
    clock, ordered = _clock(law, duration, T, pieces)
    for _ in range(ROUNDS):
        widths = _widths(clock, pieces.row, times, importance)
        total = float(widths.sum())
        if total <= budget or pieces.row.size * max(m, 1) > LARGEST_WORK:
            break
        cut = _cut(pieces, widths, 0.5 * budget / pieces.row.size)
        if cut.row.size * max(m, 1) > 2 * LARGEST_WORK:
            break
        pieces = cut
        clock, still = _clock(law, duration, T, pieces)
        ordered = ordered and still
    return _collected(law, duration, T, times, pieces, clock, ordered)


def _summed(row: np.ndarray, values: FloatArray, n: int) -> FloatArray:
    """Sum values of pieces over their increments; every increment has a piece."""
    starts = np.searchsorted(row, np.arange(n))
    return np.add.reduceat(values, starts, axis=0)


def _collected(
    law: ShiftLaw,
    duration: FloatArray,
    T: FloatArray,
    times: FloatArray,
    pieces: _Pieces,
    clock: _Clock,
    ordered: bool,
) -> Gains:
    n, m = duration.size, times.size
    value, half = np.empty((n, m)), np.empty((n, m))
    # By runs of whole increments, to bound memory.
    bounds = np.searchsorted(pieces.row, np.arange(n + 1))
    size = max(1, CHUNK // max(m, 1))
    k = 0
    while k < n:
        stop = max(k + 1, int(np.searchsorted(bounds, bounds[k] + size, "right")) - 1)
        stop = min(stop, n)
        part = slice(int(bounds[k]), int(bounds[stop]))
        chord, tangents = _bracket(clock, times, part)
        rows = pieces.row[part] - k
        # The chord errs twice as much as the tangents, the other way; the half-width still reaches both.
        value[k:stop] = _summed(rows, (chord + 2.0 * tangents) / 3.0, stop - k)
        half[k:stop] = _summed(rows, np.abs(chord - tangents) * (2.0 / 3.0), stop - k)
        k = stop
    dxi = _summed(pieces.row, clock.dxi, n)
    lag_chord, lag_tangents = _lags(clock)
    lag = _summed(pieces.row, (lag_chord + 2.0 * lag_tangents) / 3.0, n)
    clock_error = _clock_error(law, T)
    with np.errstate(over="ignore"):
        r = np.minimum(dxi[:, np.newaxis] / times, 1e300)
    decay = np.exp(-r)
    bend = np.minimum(r, 1.0)[:, :] * clock_error[:, np.newaxis]
    return Gains(
        dxi=dxi,
        clock_error=clock_error,
        decay=decay,
        decay_error=decay * (2.0 * EPS + np.minimum(r, 1e3) * clock_error[:, np.newaxis]),
        gain=value,
        gain_error=half + value * (8.0 * EPS + 2.0 * bend + 2.0 * clock_error[:, np.newaxis]),
        lag=lag,
        lag_error=_summed(pieces.row, np.abs(lag_chord - lag_tangents) * (2.0 / 3.0), n)
        + lag * (clock_error + 8.0 * EPS),
        pieces=pieces.row.size,
        ordered=ordered,
    )


def _clock_error(law: ShiftLaw, T: FloatArray) -> FloatArray:
    """Relative rounding of the reduced time of increments: of its formula, of ln a_T, and of the temperatures in it."""
    ln_a = law.ln_shift(T)
    step = np.abs(np.diff(T))
    slope = np.abs(np.diff(ln_a)) / np.where(step > 0.0, step, 1.0)
    return CLOCK_ROUNDING + 4.0 * EPS * (np.abs(ln_a[1:]) + np.abs(ln_a[:-1]) + slope * (T[1:] + T[:-1]))
