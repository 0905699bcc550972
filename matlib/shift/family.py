"""WLF, VFT and Arrhenius are one law: its three constants, whichever form it was written in."""

from __future__ import annotations

from typing import NamedTuple

from matlib.shift.arrhenius import Arrhenius
from matlib.shift.base import ShiftLaw
from matlib.shift.vft import VFT
from matlib.shift.wlf import WLF

__all__ = ["VftConstants", "as_vft"]


class VftConstants(NamedTuple):
    r"""Constants of :math:`\ln a_T = B/(T - T_\infty) - B/(T_{ref} - T_\infty)`, all in kelvin."""

    B: float
    T_inf: float
    T_ref: float


def as_vft(law: ShiftLaw) -> VftConstants | None:
    """The constants of a law of the family in VFT form, or None for any other law.

    Notes
    -----
    WLF: ``T_inf = T_ref - C2`` and ``B = ln(base) C1 C2``. Arrhenius: ``T_inf = 0 K`` and ``B = Ea/R``. A
    `MeasuredRange` is not looked through, because what it does outside its range is not of the family.

    Examples
    --------
    >>> as_vft(Arrhenius(activation_energy=8000.0, gas_constant=8.0, T_ref=300.0))
    VftConstants(B=1000.0, T_inf=0.0, T_ref=300.0)
    """
    if isinstance(law, VFT):
        return VftConstants(law.B, law.T_inf, law.T_ref)
    if isinstance(law, WLF):
        return VftConstants(law.ln_C1 * law.C2, law.T_ref - law.C2, law.T_ref)
    if isinstance(law, Arrhenius):
        return VftConstants(law.B, 0.0, law.T_ref)
    return None
