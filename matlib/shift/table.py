"""A table of shift factors with monotone interpolation."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, frozen, require_positive
from matlib.errors import ParameterError
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_ln_shift, check_temperatures

__all__ = ["Table"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Table(ShiftLaw):
    r"""Points :math:`(T, \log_{10} a_T)`, joined by monotone cubics, straight beyond the ends.

    Parameters
    ----------
    T : array_like
        Temperatures of the points [K], two or more, all different; kept in ascending order.
    log10_a : array_like
        :math:`\log_{10} a_T` at them.
    T_ref : float
        Reference temperature [K], ``> 0``. The table is used as it stands, be it zero there or not.

    Attributes
    ----------
    slope : ndarray
        :math:`d \log_{10} a_T/dT` at the points [1/K]; the straight lines beyond the ends have the end slopes.

    Notes
    -----
    Between two points the interpolant rises or falls with them and never overshoots [1]_. Slopes start from the
    parabola through three neighbours; they are zero at a turning point and scaled back, both ends of an interval
    alike, to the circle of radius three. A node takes the smaller scale of its two intervals.

    References
    ----------
    .. [1] F. N. Fritsch, R. E. Carlson, "Monotone piecewise cubic interpolation", SIAM J. Numer. Anal. 17 (1980)
       238-246.  (from memory)

    Examples
    --------
    >>> law = Table(T=[280.0, 300.0, 320.0], log10_a=[2.0, 0.0, -2.0], T_ref=300.0)
    >>> (law.ln_shift([270.0, 310.0]) / np.log(10.0)).round(12)
    array([ 3., -1.])
    """

    T: FloatArray
    log10_a: FloatArray
    T_ref: float = field()
    slope: FloatArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        T, log10_a = frozen(self.T), frozen(self.log10_a)
        if T.ndim != 1 or T.size < 2 or not (np.isfinite(T).all() and T.min() > 0.0):
            raise ParameterError("T", "two or more finite temperatures > 0 K", self.T)
        if log10_a.shape != T.shape or not np.isfinite(log10_a).all():
            raise ParameterError("log10_a", f"finite, one for each of the {T.size} temperatures", self.log10_a)
        require_positive("T_ref", self.T_ref, "K")
        order = np.argsort(T, kind="stable")
        T, log10_a = T[order], log10_a[order]
        if (repeated := T[:-1][np.diff(T) <= 0.0]).size:
            raise ParameterError("T", "different at every point", f"{float(repeated[0]):g} K twice")
        object.__setattr__(self, "T", frozen(T))
        object.__setattr__(self, "log10_a", frozen(log10_a))
        object.__setattr__(self, "slope", frozen(_monotone_slopes(T, log10_a)))

    @property
    def name(self) -> str:
        """``table``."""
        return "table"

    @property
    def knots(self) -> tuple[float, ...]:
        """The temperatures of the points [K]."""
        return tuple(self.T.tolist())

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T)
        i = np.clip(np.searchsorted(self.T, T, side="right") - 1, 0, self.T.size - 2)
        width = np.diff(self.T)[i]
        secant = (np.diff(self.log10_a) / np.diff(self.T))[i]
        s = np.clip((T - self.T[i]) / width, 0.0, 1.0)
        left, right = self.slope[i], self.slope[i + 1]
        # the straight line of the secant, and what bends it: zero at both ends, with the slopes of the points there
        bend = s * (1.0 - s) * ((left - secant) * (1.0 - s) - (right - secant) * s)
        beyond = np.minimum(T - self.T[0], 0.0) * self.slope[0] + np.maximum(T - self.T[-1], 0.0) * self.slope[-1]
        log10_a = self.log10_a[i] * (1.0 - s) + self.log10_a[i + 1] * s + width * bend + beyond
        return check_ln_shift(self.name, T, math.log(10.0) * log10_a, self.T_ref)


def _monotone_slopes(T: FloatArray, y: FloatArray) -> FloatArray:
    """Slopes at the points, limited so that every cubic is monotone."""
    h = np.diff(T)
    secant = np.diff(y) / h
    if secant.size == 1:
        return np.repeat(secant, 2)
    inner = (h[1:] * secant[:-1] + h[:-1] * secant[1:]) / (h[1:] + h[:-1])
    inner = np.where(secant[:-1] * secant[1:] > 0.0, inner, 0.0)
    first = secant[0] + (secant[0] - secant[1]) * h[0] / (h[0] + h[1])
    last = secant[-1] + (secant[-1] - secant[-2]) * h[-1] / (h[-1] + h[-2])
    ends = [edge if edge * own > 0.0 else own for edge, own in ((first, secant[0]), (last, secant[-1]))]
    slope = np.concatenate(([ends[0]], inner, [ends[1]]))
    safe = np.where(secant == 0.0, 1.0, secant)
    radius = np.hypot(slope[:-1] / safe, slope[1:] / safe)
    scale = np.where(secant == 0.0, 0.0, 3.0 / np.maximum(radius, 3.0))
    padded = np.concatenate(([1.0], scale, [1.0]))
    return slope * np.minimum(padded[:-1], padded[1:])
