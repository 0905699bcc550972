r"""Time-temperature shift: one contract, one short file for each law.

A law is an object with ``ln_shift(T)`` for arrays of kelvin. Laws of other people register through the entry-point
group ``cardproof.shift_laws``. Conversion of one into another is in `matlib.shift.conversion`, loaded where it is used.
"""

from matlib.shift.arrhenius import Arrhenius
from matlib.shift.base import ShiftLaw
from matlib.shift.crossover import Crossover
from matlib.shift.difference import largest_difference_decades
from matlib.shift.family import VftConstants, as_vft
from matlib.shift.measured import OUTSIDE, MeasuredRange, Outside
from matlib.shift.none import NoShift
from matlib.shift.polynomial import Polynomial
from matlib.shift.reduced_time import SHIFT_RULES, ShiftRule, find_shift_rule
from matlib.shift.reference import move_reference, time_factor
from matlib.shift.registry import PluginError, PluginLaw, plugin_laws
from matlib.shift.table import Table
from matlib.shift.vft import VFT
from matlib.shift.wlf import WLF

__all__ = [
    "OUTSIDE",
    "SHIFT_RULES",
    "VFT",
    "WLF",
    "Arrhenius",
    "Crossover",
    "MeasuredRange",
    "NoShift",
    "Outside",
    "PluginError",
    "PluginLaw",
    "Polynomial",
    "ShiftLaw",
    "ShiftRule",
    "Table",
    "VftConstants",
    "as_vft",
    "find_shift_rule",
    "largest_difference_decades",
    "move_reference",
    "plugin_laws",
    "time_factor",
]
