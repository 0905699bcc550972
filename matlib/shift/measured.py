"""A law together with the temperatures it was measured at."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, require_positive
from matlib.errors import ParameterError, ShiftRangeError
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_temperatures

__all__ = ["OUTSIDE", "MeasuredRange", "Outside"]

Outside = Literal["extrapolate", "refuse", "hold"]
OUTSIDE: tuple[Outside, ...] = ("extrapolate", "refuse", "hold")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class MeasuredRange(ShiftLaw):
    r"""A shift law that knows where its constants were determined.

    Parameters
    ----------
    law : ShiftLaw
        The law inside the range.
    low, high : float
        Ends of the range [K], ``0 < low < high``.
    outside : {"extrapolate", "refuse", "hold"}
        Beyond the ends: use the law all the same, raise `ShiftRangeError`, or keep the shift factor of the nearer end.

    Notes
    -----
    The reference temperature may lie outside the range; where it does, ``"hold"`` gives :math:`\ln a_T` there that is
    not zero, because the held value is the measured one.

    Examples
    --------
    >>> from matlib.shift import WLF
    >>> law = MeasuredRange(law=WLF(C1=17.44, C2=51.6, T_ref=373.15), low=373.15, high=473.15, outside="refuse")
    >>> law.ln_shift(350.0)
    Traceback (most recent call last):
    ...
    matlib.errors.ShiftRangeError: shift law wlf: no shift factor at 350 K (76.85 degC):
    outside the measured range, which ends at 373.15 K (100 degC)
    """

    law: ShiftLaw
    low: float
    high: float
    outside: Outside = "extrapolate"

    def __post_init__(self) -> None:
        require_positive("low", self.low, "K")
        if require_positive("high", self.high, "K") <= self.low:
            raise ParameterError("high", f"above the low end, {self.low:g} K", f"{self.high:g} K")
        if self.outside not in OUTSIDE:
            raise ParameterError("outside", " or ".join(f'"{policy}"' for policy in OUTSIDE), repr(self.outside))

    @property
    def name(self) -> str:
        """That of the law."""
        return self.law.name

    @property
    def T_ref(self) -> float:
        """That of the law [K]."""
        return self.law.T_ref

    @property
    def pole(self) -> float | None:
        """That of the law, where a temperature could meet it [K]."""
        pole = self.law.pole
        return None if pole is None or (self.outside != "extrapolate" and pole < self.low) else pole

    @property
    def knots(self) -> tuple[float, ...]:
        """Those of the law; with ``"hold"`` those inside, and the two ends [K]."""
        if self.outside != "hold":
            return self.law.knots
        return (self.low, *(T for T in self.law.knots if self.low < T < self.high), self.high)

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T)
        self._refuse_outside(T)
        return self.law.ln_shift(np.clip(T, self.low, self.high) if self.outside == "hold" else T)

    def mean_rate(self, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """See `ShiftLaw.mean_rate`; as the law gives it, held parts added in their share."""
        cold = check_temperatures(self.name, np.minimum(T_start, T_end))
        hot = check_temperatures(self.name, np.maximum(T_start, T_end))
        self._refuse_outside(cold)
        self._refuse_outside(hot)
        if self.outside != "hold":
            return self.law.mean_rate(cold, hot)
        inner_cold, inner_hot = np.clip(cold, self.low, self.high), np.clip(hot, self.low, self.high)
        inner = self.law.mean_rate(inner_cold, inner_hot)
        with np.errstate(under="ignore"):
            rate_low, rate_high = np.exp(-self.law.ln_shift([self.low, self.high]))
            length = np.where(hot > cold, hot - cold, 1.0)
            below = (np.minimum(hot, self.low) - np.minimum(cold, self.low)) / length
            above = (np.maximum(hot, self.high) - np.maximum(cold, self.high)) / length
            mixed = below * rate_low + (inner_hot - inner_cold) / length * inner + above * rate_high
        return np.asarray(np.where((below > 0.0) | (above > 0.0), mixed, inner))

    def _refuse_outside(self, T: FloatArray) -> None:
        if self.outside != "refuse" or T.size == 0:
            return
        lowest, highest = float(T.min()), float(T.max())
        if lowest < self.low or highest > self.high:
            worst, limit = (lowest, self.low) if lowest < self.low else (highest, self.high)
            raise ShiftRangeError(self.name, worst, limit, "outside the measured range, which ends at")
