r"""Least squares for the WLF, VFT and Arrhenius family, in constants that are good to compute with.

About a temperature :math:`T_0` inside the data, with :math:`d = T_0 - T`, the family is
:math:`\log_{10} a_T = L + m\,\varphi(q, d)`, :math:`\varphi = d/(1 - q d)`: `L` the level and `m` the steepness at
:math:`T_0`, :math:`q = 1/(T_0 - T_\infty)` how much the law bends. It is linear in `L` and `m`, and :math:`q = 0` is
a straight line, :math:`q = 1/T_0` is Arrhenius.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from matlib.arrays import FloatArray
from matlib.shift.minimax import CLOSEST, LOWEST_POLE, golden_section

__all__ = ["FamilyFit", "fit_family"]

_SCAN = 200
_MOST_STEPS = 60


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FamilyFit:
    """The best member of the family.

    Parameters
    ----------
    T0 : float
        Where `level` and `steepness` are meant [K].
    level : float
        ``log10 a_T`` at `T0`; 0 where it was held.
    steepness : float
        ``-d log10 a_T/dT`` at `T0` [1/K].
    bend : float
        ``1/(T0 - T_inf)`` [1/K].
    covariance : ndarray
        Of (level, steepness, bend), shape (3, 3), for a variance of 1; rows of what was held are zero.
    residuals : ndarray
        Points less curve, decades, shape (n,).
    at_end : {"", "low", "high"}
        Which end of the search for `T_inf` the best one sits at, if any; the bend counts as held there.
    """

    T0: float
    level: float
    steepness: float
    bend: float
    covariance: FloatArray
    residuals: FloatArray
    at_end: str = ""

    @property
    def T_inf(self) -> float:
        """The pole [K]."""
        return self.T0 - 1.0 / self.bend

    def value(self, T: float) -> float:
        """``log10 a_T`` of the curve at one temperature above the pole."""
        d = self.T0 - T
        return self.level + self.steepness * d / (1.0 - self.bend * d)


def fit_family(
    T: FloatArray, log10_a: FloatArray, *, zero_at: float | None, lowest: float, T_inf: float | None = None
) -> FamilyFit:
    r"""The member of the family with the least sum of squared residuals of :math:`\log_{10} a_T`.

    Parameters
    ----------
    T, log10_a : ndarray
        The points, shape (n,): temperatures [K], at least as many different ones as there are free constants.
    zero_at : float or None
        Where the curve is zero whatever its constants [K]; None frees its level.
    lowest : float
        Temperature that the pole stays below [K].
    T_inf : float, optional
        Hold the pole there [K]: 0 is Arrhenius.

    Returns
    -------
    FamilyFit

    Notes
    -----
    The sum of squares depends on the bend alone once level and steepness are the best for it (they are linear). A scan
    over the logarithm of the distance from `lowest` to the pole finds the deepest valley, golden sections its floor,
    and Gauss-Newton steps in all constants give the last digits.
    """
    T0 = zero_at if zero_at is not None else float(T.mean())
    d, free = T0 - T, zero_at is None
    if T_inf is not None:
        return _finished(T0, d, log10_a, 1.0 / (T0 - T_inf), free, bends=False)
    nearest, farthest = math.log(CLOSEST), math.log(lowest - LOWEST_POLE)

    def bend(s: FloatArray | float) -> FloatArray:
        return np.asarray(1.0 / (T0 - lowest + np.exp(np.atleast_1d(s))))

    def squares(s: float) -> float:
        return float(_squares(bend(s), d, log10_a, free)[0])

    scan = np.linspace(nearest, farthest, _SCAN)
    best = int(np.argmin(_squares(bend(scan), d, log10_a, free)))
    s = golden_section(squares, float(scan[max(best - 1, 0)]), float(scan[min(best + 1, _SCAN - 1)]), 1e-8)
    if s - nearest < 1e-6:
        return _finished(T0, d, log10_a, float(bend(nearest)[0]), free, bends=False, at_end="high")
    if farthest - s < 1e-6:
        return _finished(T0, d, log10_a, float(bend(farthest)[0]), free, bends=False, at_end="low")
    q = _polished(float(bend(s)[0]), d, log10_a, free, 1.0 / (T0 - lowest + CLOSEST))
    return _finished(T0, d, log10_a, q, free, bends=True)


def _linear(q: FloatArray, d: FloatArray, y: FloatArray, free: bool) -> tuple[FloatArray, FloatArray, FloatArray]:
    """The best level and steepness for each bend, shape (k,), and the residuals, shape (k, n)."""
    phi = d / (1.0 - q[:, None] * d)
    middle = phi.mean(axis=1, keepdims=True) if free else np.zeros((q.size, 1))
    mean_y = float(y.mean()) if free else 0.0
    centred = phi - middle
    m = centred @ (y - mean_y) / np.einsum("kn,kn->k", centred, centred)
    level = mean_y - m * middle[:, 0]
    return level, m, (y - mean_y) - m[:, None] * centred


def _squares(q: FloatArray, d: FloatArray, y: FloatArray, free: bool) -> FloatArray:
    residuals = _linear(q, d, y, free)[2]
    return np.asarray(np.einsum("kn,kn->k", residuals, residuals))


def _jacobian(q: float, m: float, d: FloatArray, free: bool, bends: bool) -> FloatArray:
    """Derivatives of the curve by (level, steepness, bend); the columns of what is held left out."""
    phi = d / (1.0 - q * d)
    columns = [np.ones_like(d)] * free + [phi] + [m * phi**2] * bends
    return np.column_stack(columns)


def _polished(q: float, d: FloatArray, y: FloatArray, free: bool, largest: float) -> float:
    """Gauss-Newton from close by; ends where the steps no longer shrink, which is at the rounding of the residuals."""
    last = math.inf
    squares = float(_squares(np.array([q]), d, y, free)[0])
    for _ in range(_MOST_STEPS):
        _, m, residuals = _linear(np.array([q]), d, y, free)
        J = _jacobian(q, float(m[0]), d, free, True)
        size = np.linalg.norm(J, axis=0)
        if not size.all():
            break
        step = float(np.linalg.lstsq(J / size, residuals[0], rcond=None)[0][-1] / size[-1])
        if not abs(step) < last:
            break
        following = min(q + step, 0.5 * (q + largest))
        new = float(_squares(np.array([following]), d, y, free)[0])
        if not (following > 0.0 and new <= squares * (1.0 + 1e-9) + 1e-300):
            break
        q, squares, last = following, new, abs(step)
    return q


def _finished(
    T0: float, d: FloatArray, y: FloatArray, q: float, free: bool, *, bends: bool, at_end: str = ""
) -> FamilyFit:
    level, m, residuals = _linear(np.array([q]), d, y, free)
    J = _jacobian(q, float(m[0]), d, free, bends)
    size = np.linalg.norm(J, axis=0)
    size[size == 0.0] = 1.0  # a curve without steepness; whoever asked refuses it
    inverse = np.linalg.pinv(J / size, rcond=1e-15)
    free_rows = [0] * free + [1] + [2] * bends
    covariance = np.zeros((3, 3))
    covariance[np.ix_(free_rows, free_rows)] = inverse @ inverse.T / np.outer(size, size)
    return FamilyFit(
        T0=T0,
        level=float(level[0]),
        steepness=float(m[0]),
        bend=q,
        covariance=covariance,
        residuals=np.asarray(residuals[0]),
        at_end=at_end,
    )
