"""The law of Williams, Landel and Ferry."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, require_positive
from matlib.errors import ParameterError, PoleError
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_ln_shift, check_temperatures
from matlib.shift.offset_ramp import mean_rate_below

__all__ = ["WLF"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class WLF(ShiftLaw):
    r""":math:`\log_{base} a_T = -C_1 (T - T_{ref}) / (C_2 + T - T_{ref})`.

    Parameters
    ----------
    C1 : float
        ``> 0``, in logarithms of `base`, kept as given.
    C2 : float
        Height of the reference temperature above the pole [K], ``> 0``.
    T_ref : float
        Reference temperature [K], ``> 0``.
    base : {10, "e"}
        Of the logarithm that `C1` belongs to.

    References
    ----------
    M. L. Williams, R. F. Landel, J. D. Ferry, J. Am. Chem. Soc. 77 (1955) 3701-3707.

    Examples
    --------
    >>> law = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    >>> float(law.ln_shift(383.15) / np.log(10.0)).__round__(6)
    -2.831169
    """

    C1: float
    C2: float
    T_ref: float = field()
    base: Literal[10, "e"] = 10

    def __post_init__(self) -> None:
        require_positive("C1", self.C1)
        require_positive("C2", self.C2, "K")
        require_positive("T_ref", self.T_ref, "K")
        if self.base not in (10, "e"):
            raise ParameterError("base", '10 or "e"', repr(self.base))

    @property
    def name(self) -> str:
        """``wlf``."""
        return "wlf"

    @property
    def pole(self) -> float:
        """``T_ref - C2`` [K]."""
        return self.T_ref - self.C2

    @property
    def ln_C1(self) -> float:
        """`C1` in natural logarithms."""
        return self.C1 if self.base == "e" else self.C1 * math.log(10.0)

    def _height(self, T: FloatArray) -> FloatArray:
        """Temperature above the pole, rounded once however near it is."""
        u = np.asarray(self.C2 + (T - self.T_ref))
        if u.size and u.min() <= 0.0:  # above the rounded pole, and yet not above the pole
            raise PoleError(self.name, float(T.flat[int(np.argmin(u))]), self.pole)
        return u

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T, self.pole)
        with np.errstate(over="ignore"):
            ln_a = self.ln_C1 * ((self.T_ref - T) / self._height(T))
        return check_ln_shift(self.name, T, ln_a, self.T_ref)

    def mean_rate(self, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """See `ShiftLaw.mean_rate`; in closed form."""
        cold = check_temperatures(self.name, np.minimum(T_start, T_end), self.pole)
        hot = np.asarray(np.maximum(T_start, T_end), dtype=np.float64)
        ln_hot = self.ln_shift(hot)
        relative = mean_rate_below(self._height(cold), self._height(hot), self.ln_C1 * self.C2)
        with np.errstate(under="ignore"):
            return np.exp(-ln_hot) * relative
