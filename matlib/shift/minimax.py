r"""Best approximation of a shift law by one of the WLF, VFT and Arrhenius family, in the largest error.

The candidates are :math:`\ln a_T = B \varphi(T)` with :math:`\varphi = 1/(T - T_\infty) - 1/(T_{ref} - T_\infty)`: one
at the reference temperature whatever the constants, so that the master curve measured there stays as it is.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from matlib.arrays import FloatArray

__all__ = ["CLOSEST", "LOWEST_POLE", "best_amplitude", "best_pole", "golden_section"]

LOWEST_POLE = (
    -1e4
)  # K; with the pole that far down the slope of ln a_T changes by 2 % over 100 K: all but straight in T
CLOSEST = 1e-3  # K: how near the pole may come to the range
_SCAN = 160
_GOLDEN = 0.5 * (math.sqrt(5.0) - 1.0)


def best_amplitude(y: FloatArray, phi: FloatArray) -> tuple[float, float]:
    r"""The `B` that makes :math:`\max |y - B \varphi|` least.

    Parameters
    ----------
    y, phi : ndarray
        Values to be met and the function to meet them with, shape (n,); `phi` not zero everywhere.

    Returns
    -------
    B : float
        At the optimum the largest error occurs twice, with opposite signs relative to `phi`.
    error : float
        The least largest error.

    Notes
    -----
    With `phi` made positive the residuals fall with `B`; the optimum has the largest and the smallest of them equal
    and opposite. Exchange of the two, each step solved exactly and kept within a bracket.

    Examples
    --------
    >>> best_amplitude(np.array([1.0, 3.0]), np.array([1.0, 1.0]))
    (2.0, 1.0)
    """
    y, phi = np.where(phi < 0.0, -y, y), np.abs(phi)
    matters = phi > 1e-9 * phi.max()
    ratio = y[matters] / phi[matters]
    low, high = float(ratio.min()), float(ratio.max())
    B = 0.5 * (low + high)
    for _ in range(200):
        residual = y - B * phi
        i, j = int(np.argmax(residual)), int(np.argmin(residual))
        if residual[i] + residual[j] > 0.0:
            low = B
        else:
            high = B
        exchanged = float((y[i] + y[j]) / (phi[i] + phi[j]))
        if exchanged == B:
            break
        following = exchanged if low < exchanged < high else 0.5 * (low + high)
        if following in (low, high):
            break
        B = following
    return B, float(np.abs(y - B * phi).max())


def family_function(T: FloatArray, T_inf: float, T_ref: float) -> FloatArray:
    r""":math:`\varphi(T)` [1/K], without cancellation."""
    return np.asarray((T_ref - T) / ((T - T_inf) * (T_ref - T_inf)))


def golden_section(f: Callable[[float], float], low: float, high: float, tolerance: float) -> float:
    """Where a function of one valley is least, between `low` and `high`, to `tolerance` times the larger of 1 and |x|.

    Examples
    --------
    >>> round(golden_section(lambda x: (x - 0.25) ** 2, 0.0, 1.0, 1e-6), 5)
    0.25
    """
    left, right = high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
    f_left, f_right = f(left), f(right)
    while high - low > tolerance * max(1.0, abs(low)):
        if f_left <= f_right:
            high, right, f_right = right, left, f_left
            left = high - _GOLDEN * (high - low)
            f_left = f(left)
        else:
            low, left, f_left = left, right, f_right
            right = low + _GOLDEN * (high - low)
            f_right = f(right)
    return min((low, left, right, high), key=f)


def best_pole(coarse: tuple[FloatArray, FloatArray], fine: tuple[FloatArray, FloatArray], T_ref: float) -> float:
    r"""The :math:`T_\infty` that makes the largest error least, `B` being the best for each.

    Parameters
    ----------
    coarse, fine : (T, y)
        Temperatures [K] and :math:`\ln a_T` at them, shape (n,), for the scan and for the last digits.
    T_ref : float
        Reference temperature [K], where `y` is zero.

    Returns
    -------
    T_inf : float
        [K], from `LOWEST_POLE` to just below the range.

    Notes
    -----
    A scan over the logarithm of the distance from the range to the pole finds the lowest of the valleys, golden
    sections its floor.
    """
    top = min(float(coarse[0][0]), T_ref)

    def error(ln_distance: float, T: FloatArray, y: FloatArray) -> float:
        return best_amplitude(y, family_function(T, top - math.exp(ln_distance), T_ref))[1]

    scan = np.linspace(math.log(CLOSEST), math.log(top - LOWEST_POLE), _SCAN)
    best = int(np.argmin([error(s, *coarse) for s in scan]))
    low, high = float(scan[max(best - 1, 0)]), float(scan[min(best + 1, _SCAN - 1)])
    found = golden_section(lambda s: error(s, *fine), low, high, 1e-12)
    return max(top - math.exp(found), LOWEST_POLE)
