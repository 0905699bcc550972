"""The law of Arrhenius."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, require_positive
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_ln_shift, check_temperatures
from matlib.shift.offset_ramp import mean_rate_below
from matlib.units import GAS_CONSTANT

__all__ = ["Arrhenius"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Arrhenius(ShiftLaw):
    r""":math:`\ln a_T = (E_a/R)(1/T - 1/T_{ref})`.

    Parameters
    ----------
    activation_energy : float
        [J/mol], ``> 0``.
    T_ref : float
        Reference temperature [K], ``> 0``.
    gas_constant : float
        [J/(mol K)], ``> 0``: the one that the activation energy was found with.

    Examples
    --------
    >>> float(Arrhenius(activation_energy=1e5, T_ref=298.15).ln_shift(348.15)).__round__(4)
    -5.7934
    """

    activation_energy: float
    T_ref: float = field()
    gas_constant: float = GAS_CONSTANT

    def __post_init__(self) -> None:
        require_positive("activation_energy", self.activation_energy, "J/mol")
        require_positive("T_ref", self.T_ref, "K")
        require_positive("gas_constant", self.gas_constant, "J/(mol K)")

    @property
    def name(self) -> str:
        """``arrhenius``."""
        return "arrhenius"

    @property
    def B(self) -> float:
        """Activation energy over gas constant [K]."""
        return self.activation_energy / self.gas_constant

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T)
        with np.errstate(over="ignore"):
            ln_a = self.B / self.T_ref * ((self.T_ref - T) / T)
        return check_ln_shift(self.name, T, ln_a, self.T_ref)

    def mean_rate(self, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """See `ShiftLaw.mean_rate`; in closed form."""
        cold = check_temperatures(self.name, np.minimum(T_start, T_end))
        hot = np.asarray(np.maximum(T_start, T_end), dtype=np.float64)
        ln_hot = self.ln_shift(hot)
        with np.errstate(under="ignore"):
            return np.exp(-ln_hot) * mean_rate_below(cold, hot, self.B)
