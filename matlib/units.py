"""Units: converted once when a file is read and once when a result is written; SI everywhere between."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import overload

from matlib.arrays import FloatArray
from matlib.errors import ParameterError, UnknownNameError

__all__ = [
    "ENERGY",
    "GAS_CONSTANT",
    "STRESS",
    "TEMPERATURE",
    "TIME",
    "Unit",
    "difference_name",
    "find_unit",
    "parse_temperature",
]

GAS_CONSTANT = 8.314462618  # J/(mol K), CODATA 2018 rounded as in the card format


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit: ``SI = (value + zero) * scale``.

    Parameters
    ----------
    name : str
        As written in files.
    scale : float
        Size of one unit in the SI unit.
    zero : float
        Added before scaling; not zero for degC and degF only.

    Examples
    --------
    >>> round(TEMPERATURE["degF"].to_si(32.0), 12)
    273.15
    >>> TEMPERATURE["degF"].difference_to_si(9.0)
    5.0
    """

    name: str
    scale: float
    zero: float = 0.0

    @overload
    def to_si(self, value: float) -> float: ...
    @overload
    def to_si(self, value: FloatArray) -> FloatArray: ...
    def to_si(self, value: float | FloatArray) -> float | FloatArray:
        """Convert a value to the SI unit."""
        return (value + self.zero) * self.scale

    @overload
    def from_si(self, value: float) -> float: ...
    @overload
    def from_si(self, value: FloatArray) -> FloatArray: ...
    def from_si(self, value: float | FloatArray) -> float | FloatArray:
        """Convert a value in the SI unit to this unit."""
        return value / self.scale - self.zero

    def difference_to_si(self, value: float) -> float:
        """Convert a difference (a C2, an interval): scaled, never moved."""
        return value * self.scale

    def difference_from_si(self, value: float) -> float:
        """Convert a difference in the SI unit to this unit."""
        return value / self.scale


def _table(**scales: float) -> dict[str, Unit]:
    return {name: Unit(name, scale) for name, scale in scales.items()}


PSI = 6894.757293168361  # Pa, from the international pound and inch and standard gravity
STRESS = _table(Pa=1.0, kPa=1e3, MPa=1e6, GPa=1e9, psi=PSI, ksi=1e3 * PSI)
TIME = _table(s=1.0, ms=1e-3, us=1e-6, min=60.0, h=3600.0, d=86400.0)
TEMPERATURE = {
    "K": Unit("K", 1.0),
    "degC": Unit("degC", 1.0, 273.15),
    "degF": Unit("degF", 5.0 / 9.0, 459.67),
}
ENERGY = {
    "J/mol": Unit("J/mol", 1.0),
    "kJ/mol": Unit("kJ/mol", 1e3),
    "kcal/mol": Unit("kcal/mol", 4184.0),
    "eV": Unit("eV", 96485.33212),  # elementary charge times Avogadro's number, CODATA 2018
}
QUANTITIES = {"stress": STRESS, "time": TIME, "temperature": TEMPERATURE, "energy": ENERGY}


def difference_name(unit: str) -> str:
    """The unit of temperature differences: a kelvin, unless degrees are Fahrenheit's.

    Examples
    --------
    >>> difference_name("degC"), difference_name("degF")
    ('K', 'degF')
    """
    return "degF" if unit == "degF" else "K"


def find_unit(quantity: str, name: object) -> Unit:
    """Look a unit up by its name.

    Parameters
    ----------
    quantity : {"stress", "time", "temperature", "energy"}
        What is measured.
    name : str
        The unit's name.

    Raises
    ------
    UnknownNameError
        If there is no such unit; lists the known ones.

    Examples
    --------
    >>> find_unit("stress", "MPa").to_si(3.0)
    3000000.0
    """
    known = QUANTITIES[quantity]
    if not isinstance(name, str) or name not in known:
        raise UnknownNameError(f"{quantity} unit", name, known)
    return known[name]


_NUMBER = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*([A-Za-z]*)\s*")


def parse_temperature(text: str, default: Unit) -> float:
    """Read a temperature such as ``40degC``, ``313.15K`` or ``104degF`` into kelvin.

    Parameters
    ----------
    text : str
        A number, with or without a unit.
    default : Unit
        The unit of a bare number.

    Returns
    -------
    T : float
        Temperature [K], ``> 0``.

    Raises
    ------
    ParameterError
        If the text is no temperature, or one at or below absolute zero.

    Examples
    --------
    >>> parse_temperature("40degC", TEMPERATURE["K"])
    313.15
    """
    match = _NUMBER.fullmatch(text)
    expected = "a temperature such as 40degC, 313.15K or 104degF"
    if match is None:
        raise ParameterError("temperature", expected, repr(text))
    number, name = match.groups()
    if name and name not in TEMPERATURE:
        raise ParameterError("temperature", expected, repr(text))
    T = (TEMPERATURE[name] if name else default).to_si(float(number))
    if not 0.0 < T < 1e6:
        raise ParameterError("temperature", "above absolute zero and below 1e6 K", f"{text!r} = {T:g} K")
    return T
