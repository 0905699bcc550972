"""A material: two Prony series, a shift law and an expansion coefficient. What a card says, in SI units."""

from __future__ import annotations

from dataclasses import dataclass

from matlib.arrays import require_finite
from matlib.prony import PronySeries
from matlib.shift.base import ShiftLaw

__all__ = ["Material"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Material:
    """Isotropic, linear viscoelastic, thermorheologically simple.

    Parameters
    ----------
    shear, bulk : PronySeries
        Relaxation moduli in shear and in volume [Pa], times [s] at the reference temperature of `shift`.
    shift : ShiftLaw
        Time-temperature shift; one clock for both moduli.
    expansion : float
        Linear thermal expansion coefficient [1/K].
    """

    shear: PronySeries
    bulk: PronySeries
    shift: ShiftLaw
    expansion: float = 0.0

    def __post_init__(self) -> None:
        require_finite("expansion", self.expansion, "1/K")
