"""What every shift law checks: the temperatures it is given, its pole, and that 1/a_T stays a number."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray
from matlib.errors import PoleError, ShiftRangeError

__all__ = ["LARGEST_LN_RATE", "check_ln_shift", "check_temperatures"]

LARGEST_LN_RATE = 690.0  # exp(690) = 4e299: leaves room below the largest double, 1.8e308
_LARGEST_LN_SHIFT = 1e300  # frozen: any rate below exp(-745) is zero; a finite ln a_T keeps differences finite


def check_temperatures(law: str, T: ArrayLike, pole: float | None = None) -> FloatArray:
    """Temperatures as an array, all of them finite, above absolute zero and above the pole.

    Parameters
    ----------
    law : str
        Name of the law, for the message.
    T : array_like
        Temperature [K].
    pole : float, optional
        Where the law diverges [K].

    Returns
    -------
    T : ndarray
        Of the same shape, float64.

    Raises
    ------
    PoleError
        If any is at or below the pole; names the lowest.
    ShiftRangeError
        If any is not finite, or at or below absolute zero.
    """
    temperatures = np.asarray(T, dtype=np.float64)
    if temperatures.size == 0:
        return temperatures
    lowest, highest = float(temperatures.min()), float(temperatures.max())
    if not (math.isfinite(lowest) and math.isfinite(highest)):
        bad = lowest if not math.isfinite(lowest) else highest
        raise ShiftRangeError(law, bad, 0.0, "a temperature must be a finite number above")
    if pole is not None and lowest <= pole:
        raise PoleError(law, lowest, pole)
    if lowest <= 0.0:
        raise ShiftRangeError(law, lowest, 0.0, "a temperature must be above absolute zero,")
    return temperatures


def check_ln_shift(law: str, T: FloatArray, ln_a: ArrayLike, T_ref: float) -> FloatArray:
    r"""The values of :math:`\ln a_T`, made sure that :math:`1/a_T` can be written as a double.

    Parameters
    ----------
    law : str
        Name of the law, for the message.
    T : ndarray
        The temperatures [K] that they belong to.
    ln_a : array_like
        :math:`\ln a_T`, of the same shape.
    T_ref : float
        Reference temperature [K], for the message.

    Returns
    -------
    ln_a : ndarray
        The same; values beyond 1e300 (frozen many times over) are 1e300.

    Raises
    ------
    ShiftRangeError
        Where :math:`\ln a_T < -690`; names the worst temperature.
    """
    values = np.minimum(ln_a, _LARGEST_LN_SHIFT)
    if values.size and not values.min() >= -LARGEST_LN_RATE:
        worst = int(np.argmin(values))
        reason = (
            f"ln a_T = {float(values.flat[worst]):.4g} there is below -{LARGEST_LN_RATE:.0f}, and 1/a_T overflows; "
            "the law is normalised at T_ref ="
        )
        raise ShiftRangeError(law, float(T.flat[worst]), T_ref, reason)
    return np.asarray(values)
