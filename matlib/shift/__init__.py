r"""Time-temperature shift: one contract, one short file for each law.

A law is an object with ``ln_shift(T)`` for arrays of kelvin. Laws of other people register through the entry-point
group ``cardproof.shift_laws``.
"""

from matlib.shift.arrhenius import Arrhenius
from matlib.shift.base import ShiftLaw
from matlib.shift.crossover import Crossover
from matlib.shift.measured import MeasuredRange
from matlib.shift.none import NoShift
from matlib.shift.polynomial import Polynomial
from matlib.shift.reduced_time import SHIFT_RULES, ShiftRule, find_shift_rule
from matlib.shift.table import Table
from matlib.shift.vft import VFT
from matlib.shift.wlf import WLF

__all__ = [
    "SHIFT_RULES",
    "VFT",
    "WLF",
    "Arrhenius",
    "Crossover",
    "MeasuredRange",
    "NoShift",
    "Polynomial",
    "ShiftLaw",
    "ShiftRule",
    "Table",
    "find_shift_rule",
]
