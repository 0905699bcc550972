"""How far two shift laws are apart."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable

import numpy as np

from matlib.arrays import FloatArray, require_positive
from matlib.errors import ParameterError
from matlib.shift.base import ShiftLaw

__all__ = ["chebyshev_temperatures", "largest_difference_decades", "largest_value"]

_DENSE = 4000
_ZOOM = 41


def chebyshev_temperatures(T_low: float, T_high: float, count: int, extra: Iterable[float] = ()) -> FloatArray:
    """Temperatures from `T_low` to `T_high`, denser at the ends, with those of `extra` that lie between.

    Parameters
    ----------
    T_low, T_high : float
        Ends [K], both included.
    count : int
        How many, before `extra`.
    extra : iterable of float
        More temperatures [K]; those outside are left out.

    Returns
    -------
    T : ndarray
        Ascending, all different.
    """
    s = 0.5 - 0.5 * np.cos(np.linspace(0.0, np.pi, count))
    T = np.append(T_low + (T_high - T_low) * s, [T_high, *(knot for knot in extra if T_low < knot < T_high)])
    return np.unique(np.clip(T, T_low, T_high))


def largest_value(f: Callable[[FloatArray], FloatArray], T: FloatArray) -> tuple[float, float]:
    """The largest value of `f` and its temperature: on the grid `T`, then on finer ones about the place.

    Parameters
    ----------
    f : callable
        Array of temperatures [K] in, array of the same shape out.
    T : ndarray
        Ascending temperatures [K], fine enough to single out the highest peak.

    Returns
    -------
    value, at : float
        The value, and its temperature [K].
    """
    values = f(T)
    best = int(np.argmax(values))
    value, at = float(values[best]), float(T[best])
    for _ in range(4):
        T = np.linspace(T[max(best - 1, 0)], T[min(best + 1, T.size - 1)], _ZOOM)
        values = f(T)
        best = int(np.argmax(values))
        if values[best] > value:
            value, at = float(values[best]), float(T[best])
    return value, at


def largest_difference_decades(
    law_a: ShiftLaw,
    law_b: ShiftLaw,
    T_low: float,
    T_high: float,
    *,
    T_common: float | None = None,
    time_factor: float = 1.0,
) -> tuple[float, float]:
    r"""Largest difference of :math:`\log_{10} a_T` between two laws over a temperature range.

    Parameters
    ----------
    law_a, law_b : ShiftLaw
        As they stand: each with its own reference temperature.
    T_low, T_high : float
        Range [K], ``T_low <= T_high``.
    T_common : float, optional
        Temperature [K] where both are taken as 1, whatever their references.
    time_factor : float, optional
        How many times longer the relaxation times are that go with the second law; its shift factors count so much more.

    Returns
    -------
    decades : float
        ``>= 0``.
    at_T : float
        Where [K].

    Raises
    ------
    ShiftRangeError
        If a law has no answer somewhere in the range.

    Examples
    --------
    >>> from matlib.shift import Arrhenius, NoShift
    >>> decades, at = largest_difference_decades(NoShift(), Arrhenius(activation_energy=1e5, T_ref=300.0), 290.0, 300.0)
    >>> round(decades, 6), at
    (0.600386, 290.0)
    """
    require_positive("T_low", T_low, "K")
    if require_positive("T_high", T_high, "K") < T_low:
        raise ParameterError("T_high", f"at or above T_low = {T_low:g} K", f"{T_high:g} K")

    offset = math.log(time_factor)
    if T_common is not None:
        offset = float(law_a.ln_shift(T_common) - law_b.ln_shift(T_common))

    def difference(T: FloatArray) -> FloatArray:
        return np.abs(law_a.ln_shift(T) - law_b.ln_shift(T) - offset) / math.log(10.0)

    return largest_value(difference, chebyshev_temperatures(T_low, T_high, _DENSE, (*law_a.knots, *law_b.knots)))
