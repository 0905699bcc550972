r"""Shift rules: how much reduced time passes in an increment, from the temperatures at its ends.

The temperature is taken as linear in time over the increment; ``integrated`` is then exact, the others approximate.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray
from matlib.errors import ParameterError, UnknownNameError
from matlib.shift.base import ShiftLaw

__all__ = ["SHIFT_RULES", "ShiftRule", "find_shift_rule"]

ShiftRule = Callable[[ShiftLaw, ArrayLike, ArrayLike, ArrayLike], FloatArray]
"""``rule(law, dt, T_start, T_end)``: arrays that broadcast, in s and K; gives reduced time [s at ``T_ref``]."""


def _reduced(dt: ArrayLike, rate: FloatArray) -> FloatArray:
    """Duration times rate, both checked: exactly 0 for ``dt = 0``, and never infinite."""
    durations = np.asarray(dt, dtype=np.float64)
    if durations.size and not (durations.min() >= 0.0 and durations.max() < np.inf):
        bad = durations[~((durations >= 0.0) & (durations < np.inf))]
        raise ParameterError("dt", "finite and >= 0 s", float(bad.flat[0]))
    with np.errstate(over="ignore", under="ignore"):
        dxi = np.asarray(durations * rate)
    if dxi.size and not dxi.max() < np.inf:
        raise ParameterError(
            "dt",
            "short enough that dt/a_T can be written as a double",
            f"{float(durations.max()):g} s",
            hint=f"1/a_T goes up to {float(np.max(rate)):.3g}",
        )
    return dxi


def _rate(law: ShiftLaw, T: ArrayLike) -> FloatArray:
    with np.errstate(under="ignore"):
        return np.exp(-law.ln_shift(T))


def _start(law: ShiftLaw, dt: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
    """Rate at the start, over the whole increment; first order."""
    return _reduced(dt, _rate(law, np.broadcast_arrays(T_start, T_end)[0]))


def _end(law: ShiftLaw, dt: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
    """Rate at the end, over the whole increment; first order."""
    return _reduced(dt, _rate(law, np.broadcast_arrays(T_start, T_end)[1]))


def _middle(law: ShiftLaw, dt: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
    """Rate at the mean temperature; second order."""
    return _reduced(dt, _rate(law, 0.5 * np.add(T_start, T_end)))


def _mean_rate(law: ShiftLaw, dt: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
    """Average of the two end rates; second order."""
    return _reduced(dt, 0.5 * (_rate(law, T_start) + _rate(law, T_end)))


def _mean_log(law: ShiftLaw, dt: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
    r""":math:`\ln a_T` linear in time: the logarithmic mean of the end rates; second order.

    B. C. Carlson, "The logarithmic mean", Amer. Math. Monthly 79 (1972) 615-618.  (from memory)
    Evaluated from the larger rate downwards, so that a quench underflows instead of giving ``0 * inf``.
    """
    ln_start, ln_end = law.ln_shift(T_start), law.ln_shift(T_end)
    drop = np.abs(ln_end - ln_start)
    safe = np.where(drop > 0.0, drop, 1.0)
    with np.errstate(under="ignore"):
        part = np.where(drop > 0.0, -np.expm1(-safe) / safe, 1.0)
        return _reduced(dt, np.exp(-np.minimum(ln_start, ln_end)) * part)


def _integrated(law: ShiftLaw, dt: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
    """The integral itself; exact for a temperature linear in time. Where it never changes, one rate does for all."""
    start, end = np.asarray(T_start, dtype=np.float64), np.asarray(T_end, dtype=np.float64)
    if start.size > 1 and end.size and np.all(start == start.flat[0]) and np.all(end == start.flat[0]):
        rate = law.mean_rate(start.flat[0], start.flat[0])
        return _reduced(dt, np.broadcast_to(rate, np.broadcast_shapes(start.shape, end.shape)))
    return _reduced(dt, law.mean_rate(start, end))


SHIFT_RULES: dict[str, ShiftRule] = {
    "start": _start,
    "end": _end,
    "middle": _middle,
    "mean-rate": _mean_rate,
    "mean-log": _mean_log,
    "integrated": _integrated,
}


def find_shift_rule(name: str) -> ShiftRule:
    """Look a shift rule up by its name.

    Raises
    ------
    UnknownNameError
        If there is none; lists the known ones.

    Examples
    --------
    >>> from matlib.shift import WLF
    >>> law = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    >>> float(find_shift_rule("integrated")(law, 10.0, 373.15, 383.15).round(6))  # 1 K/s over 10 K
    1172.282413
    """
    try:
        return SHIFT_RULES[name]
    except KeyError:
        raise UnknownNameError("shift rule", name, SHIFT_RULES) from None
