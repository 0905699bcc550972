"""The law of Vogel, Fulcher and Tammann: Arrhenius with an offset temperature."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, require_finite, require_positive
from matlib.errors import ParameterError
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_ln_shift, check_temperatures
from matlib.shift.offset_ramp import mean_rate_below

__all__ = ["VFT"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class VFT(ShiftLaw):
    r""":math:`\ln a_T = B/(T - T_\infty) - B/(T_{ref} - T_\infty)`.

    Parameters
    ----------
    B : float
        [K], ``> 0``; an activation energy over the gas constant, where one is given.
    T_inf : float
        The pole [K]; it may lie below absolute zero.
    T_ref : float
        Reference temperature [K], ``> 0`` and above `T_inf`.

    References
    ----------
    H. Vogel, Phys. Z. 22 (1921) 645; G. S. Fulcher, J. Am. Ceram. Soc. 8 (1925) 339; G. Tammann, W. Hesse,
    Z. anorg. allg. Chem. 156 (1926) 245.  (from memory)

    Examples
    --------
    >>> VFT(B=1000.0, T_inf=200.0, T_ref=300.0).ln_shift([250.0, 300.0])
    array([10.,  0.])
    """

    B: float
    T_inf: float
    T_ref: float = field()

    def __post_init__(self) -> None:
        require_positive("B", self.B, "K")
        require_finite("T_inf", self.T_inf, "K")
        if require_positive("T_ref", self.T_ref, "K") <= self.T_inf:
            raise ParameterError("T_ref", f"above the pole T_inf = {self.T_inf:g} K", f"{self.T_ref:g} K")

    @property
    def name(self) -> str:
        """``vft``."""
        return "vft"

    @property
    def pole(self) -> float:
        """`T_inf` [K]."""
        return self.T_inf

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T, self.T_inf)
        with np.errstate(over="ignore"):
            ln_a = self.B / (self.T_ref - self.T_inf) * ((self.T_ref - T) / (T - self.T_inf))
        return check_ln_shift(self.name, T, ln_a, self.T_ref)

    def mean_rate(self, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """See `ShiftLaw.mean_rate`; in closed form."""
        cold = check_temperatures(self.name, np.minimum(T_start, T_end), self.T_inf)
        hot = np.asarray(np.maximum(T_start, T_end), dtype=np.float64)
        ln_hot = self.ln_shift(hot)
        relative = mean_rate_below(np.asarray(cold - self.T_inf), np.asarray(hot - self.T_inf), self.B)
        with np.errstate(under="ignore"):
            return np.exp(-ln_hot) * relative
