"""A polynomial in the distance from the reference temperature."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, frozen, require_positive
from matlib.errors import ParameterError
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_ln_shift, check_temperatures

__all__ = ["Polynomial"]

_FARTHEST = 1e6  # K: no temperature of the trade is farther from T_ref


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Polynomial(ShiftLaw):
    r""":math:`\log_{10} a_T = \sum_{k \ge 1} c_k (T - T_{ref})^k`.

    Parameters
    ----------
    coefficients : array_like
        :math:`c_1, c_2, \dots` [1/K, 1/K^2, ...], at least one.
    T_ref : float
        Reference temperature [K], ``> 0``.

    Examples
    --------
    >>> law = Polynomial(coefficients=[-0.1, 5e-4], T_ref=300.0)
    >>> law.knots  # log10 a_T turns there
    (400.0,)
    """

    coefficients: FloatArray
    T_ref: float = field()
    knots: tuple[float, ...] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        coefficients = frozen(self.coefficients)
        if coefficients.ndim != 1 or coefficients.size == 0 or not np.isfinite(coefficients).all():
            raise ParameterError("coefficients", "one or more finite numbers", self.coefficients)
        require_positive("T_ref", self.T_ref, "K")
        object.__setattr__(self, "coefficients", coefficients)
        object.__setattr__(self, "knots", _turning_points(coefficients, self.T_ref))

    @property
    def name(self) -> str:
        """``polynomial``."""
        return "polynomial"

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T)
        x = T - self.T_ref
        total = np.zeros_like(x)
        with np.errstate(over="ignore", invalid="ignore"):
            for c in self.coefficients[::-1]:
                total = (total + c) * x
            ln_a = math.log(10.0) * total
        return check_ln_shift(self.name, T, ln_a, self.T_ref)


def _turning_points(coefficients: FloatArray, T_ref: float) -> tuple[float, ...]:
    """Temperatures above 0 K where the derivative is zero. A double root that rounding made complex is kept."""
    slope = coefficients * np.arange(1.0, coefficients.size + 1.0)
    while slope.size and _is_negligible(slope):
        slope = slope[:-1]
    if slope.size < 2:
        return ()
    roots = np.roots(slope[::-1])
    real = roots.real[np.abs(roots.imag) <= 1e-6 * np.abs(roots)] + T_ref
    return tuple(float(T) for T in np.unique(real) if T > 0.0)


def _is_negligible(slope: FloatArray) -> bool:
    """Whether the last term is zero, or lost in rounding `_FARTHEST` from T_ref: its root would overflow."""
    if slope[-1] == 0.0:
        return True
    k = np.flatnonzero(slope)
    size = np.log(np.abs(slope[k])) + k * math.log(_FARTHEST)
    return bool(size[-1] < size.max() + math.log(np.finfo(np.float64).eps))
