"""From the constants that are good to compute with to those that a law is written with, and the derivatives between them."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Literal, NamedTuple

from matlib.shift.arrhenius import Arrhenius
from matlib.shift.base import ShiftLaw
from matlib.shift.least_squares import FamilyFit
from matlib.shift.vft import VFT
from matlib.shift.wlf import WLF

__all__ = ["NAMES", "WRITERS", "Style", "Written", "level_gradient"]

NAMES = {"wlf": ("C1", "C2"), "vft": ("B", "T_inf"), "arrhenius": ("activation_energy",)}
"""The constants of each form."""

_LN10 = math.log(10.0)


class Style(NamedTuple):
    """What a law is written with: its reference temperature [K], the base of ``C1``, the gas constant [J/(mol K)]."""

    at: float
    base: Literal[10, "e"]
    gas_constant: float


class Written(NamedTuple):
    """A law, its constants, and for each its derivatives by (level, steepness, bend)."""

    law: ShiftLaw
    constants: list[float]
    gradients: list[list[float]]


def level_gradient(best: FamilyFit, at: float) -> list[float]:
    """Derivatives of the curve's value at a temperature by (level, steepness, bend)."""
    d = best.T0 - at
    phi = d / (1.0 - best.bend * d)
    return [1.0, phi, best.steepness * phi**2]


def _strength(best: FamilyFit) -> tuple[float, list[float], list[float]]:
    """``B/ln 10`` [K], its derivatives by (level, steepness, bend), and those of the pole."""
    m, q = best.steepness, best.bend
    return m / q**2, [0.0, 1.0 / q**2, -2.0 * m / q**3], [0.0, 0.0, 1.0 / q**2]


def _wlf(best: FamilyFit, style: Style) -> Written:
    b, db, dpole = _strength(best)
    C2 = 1.0 / best.bend + (style.at - best.T0)
    unit = 1.0 if style.base == 10 else _LN10
    C1 = unit * b / C2
    dC1 = [unit * (one / C2 + b / C2**2 * pole) for one, pole in zip(db, dpole, strict=True)]
    law = WLF(C1=C1, C2=C2, T_ref=style.at, base=style.base)
    return Written(law, [C1, C2], [dC1, [-pole for pole in dpole]])


def _vft(best: FamilyFit, style: Style) -> Written:
    b, db, dpole = _strength(best)
    law = VFT(B=_LN10 * b, T_inf=best.T_inf, T_ref=style.at)
    return Written(law, [law.B, law.T_inf], [[_LN10 * one for one in db], dpole])


def _arrhenius(best: FamilyFit, style: Style) -> Written:
    b, db, _ = _strength(best)
    unit = _LN10 * style.gas_constant
    law = Arrhenius(activation_energy=unit * b, T_ref=style.at, gas_constant=style.gas_constant)
    return Written(law, [unit * b], [[unit * one for one in db]])


WRITERS: dict[str, Callable[[FamilyFit, Style], Written]] = {"wlf": _wlf, "vft": _vft, "arrhenius": _arrhenius}
