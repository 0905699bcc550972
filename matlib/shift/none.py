"""No shift: a material that does not see temperature."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, require_positive
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_temperatures

__all__ = ["NoShift"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NoShift(ShiftLaw):
    r""":math:`a_T = 1` at every temperature.

    Parameters
    ----------
    T_ref : float
        Reference temperature [K], ``> 0``; changes nothing but where thermal strain may count from.

    Examples
    --------
    >>> NoShift().ln_shift([250.0, 350.0])
    array([0., 0.])
    """

    T_ref: float = field(default=293.15)

    def __post_init__(self) -> None:
        require_positive("T_ref", self.T_ref, "K")

    @property
    def name(self) -> str:
        """``none``."""
        return "none"

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        return np.zeros(check_temperatures(self.name, T).shape)

    def mean_rate(self, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """See `ShiftLaw.mean_rate`; one."""
        check_temperatures(self.name, np.minimum(T_start, T_end))
        return np.ones(check_temperatures(self.name, np.maximum(T_start, T_end)).shape)
