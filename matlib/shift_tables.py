"""The ``[shift]`` table of a card: from the file's constants to a law, and back."""

from __future__ import annotations

from abc import abstractmethod
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator

from matlib.arrays import frozen
from matlib.card_schema import Coefficient, EnergyUnit, Number, Pair
from matlib.documents import ContradictionError, Document, validated
from matlib.errors import Fault, FaultyInputError, ParameterError, nearest_hint
from matlib.files import shown
from matlib.shift import (
    VFT,
    WLF,
    Arrhenius,
    Crossover,
    MeasuredRange,
    NoShift,
    Polynomial,
    ShiftLaw,
    Table,
)
from matlib.shift.registry import plugin_laws
from matlib.units import ENERGY, GAS_CONSTANT, Unit

__all__ = ["LAW_TABLES", "LawTable", "RangeTable", "build_shift", "parse_shift", "written_shift"]

REFERENCE = Field(description="the reference temperature")


class LawTable(Document):
    """Constants of one law, in the units of the file."""

    positive: ClassVar[tuple[str, ...]] = ()
    """Constants that the physics wants ``> 0``."""

    @abstractmethod
    def build(self, temperature: Unit) -> ShiftLaw:
        """The law in SI units; `ParameterError` where a constant is not admissible."""


class NoneTable(LawTable):
    """No effect of temperature."""

    law: Literal["none"]
    T_ref: Number | None = None

    def build(self, temperature: Unit) -> ShiftLaw:
        """The law that never shifts."""
        return NoShift() if self.T_ref is None else NoShift(T_ref=temperature.to_si(self.T_ref))


class WlfTable(LawTable):
    """Williams, Landel and Ferry."""

    positive: ClassVar[tuple[str, ...]] = ("C1", "C2")
    law: Literal["wlf"]
    T_ref: Number = REFERENCE
    C1: Number = Field(description="the constant C1")
    C2: Number = Field(description="the constant C2, a temperature difference")
    base: Literal[10, "e"] = 10

    def build(self, temperature: Unit) -> ShiftLaw:
        """WLF with C2 in kelvin."""
        C2 = temperature.difference_to_si(self.C2)
        return WLF(C1=self.C1, C2=C2, T_ref=temperature.to_si(self.T_ref), base=self.base)


class ArrheniusTable(LawTable):
    """Arrhenius."""

    positive: ClassVar[tuple[str, ...]] = ("activation_energy", "gas_constant")
    law: Literal["arrhenius"]
    T_ref: Number = REFERENCE
    activation_energy: Number = Field(description="the activation energy")
    energy_unit: EnergyUnit = "kJ/mol"
    gas_constant: Number = GAS_CONSTANT

    def build(self, temperature: Unit) -> ShiftLaw:
        """Arrhenius with the energy in J/mol."""
        energy = ENERGY[self.energy_unit].to_si(self.activation_energy)
        return Arrhenius(activation_energy=energy, T_ref=temperature.to_si(self.T_ref), gas_constant=self.gas_constant)


class VftTable(LawTable):
    """Vogel, Fulcher and Tammann: Arrhenius with an offset temperature."""

    positive: ClassVar[tuple[str, ...]] = ("B", "activation_energy", "gas_constant")
    law: Literal["vft"]
    T_ref: Number = REFERENCE
    T_inf: Number = Field(description="the offset temperature T_inf, where the law diverges")
    B: Number | None = None
    activation_energy: Number | None = None
    energy_unit: EnergyUnit = "kJ/mol"
    gas_constant: Number = GAS_CONSTANT

    @model_validator(mode="after")
    def _one_strength(self) -> VftTable:
        if (self.B is None) == (self.activation_energy is None):
            found = "B and activation_energy" if self.B is not None else "neither B nor activation_energy"
            raise ContradictionError("", found, "either B or activation_energy")
        return self

    def build(self, temperature: Unit) -> ShiftLaw:
        """VFT with B in kelvin."""
        if self.B is not None:
            B = temperature.difference_to_si(self.B)
        else:
            assert self.activation_energy is not None
            B = ENERGY[self.energy_unit].to_si(self.activation_energy) / self.gas_constant
        return VFT(B=B, T_inf=temperature.to_si(self.T_inf), T_ref=temperature.to_si(self.T_ref))


class PolynomialTable(LawTable):
    """Polynomial of log10 a_T in the distance from T_ref."""

    law: Literal["polynomial"]
    T_ref: Number = REFERENCE
    coefficients: Annotated[list[Coefficient], Field(min_length=1, max_length=12)] = Field(
        description="a list of coefficients of (T-T_ref), (T-T_ref)^2, ..."
    )

    def build(self, temperature: Unit) -> ShiftLaw:
        """Polynomial with coefficients per kelvin."""
        scaled = [c / temperature.scale**k for k, c in enumerate(self.coefficients, start=1)]
        return Polynomial(coefficients=frozen(scaled), T_ref=temperature.to_si(self.T_ref))


class TableTable(LawTable):
    """Measured shift factors."""

    law: Literal["table"]
    T_ref: Number = REFERENCE
    points: Annotated[list[Pair], Field(min_length=2, max_length=10_000)] = Field(
        description="a list of points [temperature, log10 a_T]"
    )

    def build(self, temperature: Unit) -> ShiftLaw:
        """Table with temperatures in kelvin."""
        T, log10_a = zip(*self.points, strict=True)
        kelvin = [temperature.to_si(value) for value in T]
        return Table(T=frozen(kelvin), log10_a=frozen(log10_a), T_ref=temperature.to_si(self.T_ref))


class CrossoverTable(LawTable):
    """One law below a temperature and another above it."""

    law: Literal["crossover"]
    at: Number = Field(description="the temperature where the laws meet")
    T_ref: Number | None = None
    below: dict[str, Any] = Field(description="a table [shift.below] with a law of its own")
    above: dict[str, Any] = Field(description="a table [shift.above] with a law of its own")

    def build(self, temperature: Unit) -> ShiftLaw:
        """Both laws, joined."""
        below = parse_shift(self.below, prefix=("shift", "below")).build(temperature)
        above = parse_shift(self.above, prefix=("shift", "above")).build(temperature)
        T_ref = above.T_ref if self.T_ref is None else temperature.to_si(self.T_ref)
        return Crossover(below=below, above=above, at=temperature.to_si(self.at), T_ref=T_ref)


class PluginTable(LawTable):
    """A law that somebody else registered; its constants are its own affair."""

    law: str
    constants: dict[str, Any]

    def build(self, temperature: Unit) -> ShiftLaw:
        """Whatever the plug-in makes of the constants."""
        return plugin_laws()[self.law](self.constants, temperature)


class RangeTable(Document):
    """Where the constants were determined, and what to do beyond."""

    measured: Pair | None = None
    outside: Literal["extrapolate", "refuse", "hold"] = "extrapolate"

    @model_validator(mode="after")
    def _ordered(self) -> RangeTable:
        if self.measured is not None and not self.measured[0] < self.measured[1]:
            raise ContradictionError("measured", shown(self.measured), "the lower temperature, then the higher")
        if self.measured is None and self.outside != "extrapolate":
            expected = f'[lower, higher] temperature, since outside = "{self.outside}" is relative to it'
            raise ContradictionError("measured", "nothing", expected)
        return self


LAW_TABLES: dict[str, type[LawTable]] = {
    "none": NoneTable,
    "wlf": WlfTable,
    "arrhenius": ArrheniusTable,
    "vft": VftTable,
    "polynomial": PolynomialTable,
    "table": TableTable,
    "crossover": CrossoverTable,
}


def parse_shift(table: dict[str, Any], prefix: tuple[str, ...] = ("shift",)) -> LawTable:
    """Check the constants of a ``[shift]`` table, `measured` and `outside` aside.

    Raises
    ------
    FaultyInputError
        With every fault; an unknown law lists the known ones, plug-ins included.
    """
    key = ".".join(prefix)
    name = table.get("law")
    if not isinstance(name, str):
        known = ", ".join(LAW_TABLES)
        raise FaultyInputError(
            [Fault(key=f"{key}.law", found=shown(name) if name is not None else "nothing", expected=f"one of {known}")]
        )
    if name == "crossover" and len(prefix) > 1:
        simple = ", ".join(law for law in LAW_TABLES if law != "crossover")
        raise FaultyInputError([Fault(key=f"{key}.law", found=repr(name), expected=f"one of {simple}")])
    if name in LAW_TABLES:
        law_table = validated(LAW_TABLES[name], table, prefix)
        if isinstance(law_table, CrossoverTable):
            _parse_both(law_table)
        return law_table
    plugins = plugin_laws()
    if name not in plugins:
        names = [*LAW_TABLES, *plugins]
        fault = Fault(
            key=f"{key}.law", found=repr(name), expected=f"one of {', '.join(names)}", hint=nearest_hint(name, names)
        )
        raise FaultyInputError([fault])
    return PluginTable(law=name, constants={k: v for k, v in table.items() if k != "law"})


def _parse_both(table: CrossoverTable) -> None:
    faults: list[Fault] = []
    for side, inner in (("below", table.below), ("above", table.above)):
        try:
            parse_shift(inner, prefix=("shift", side))
        except FaultyInputError as error:
            faults += error.faults
    if faults:
        raise FaultyInputError(faults)


def split_range(table: dict[str, Any]) -> tuple[dict[str, Any], RangeTable]:
    """Separate a law's constants from `measured` and `outside`; `FaultyInputError` where the latter are not right."""
    own = ("measured", "outside")
    constants = {key: value for key, value in table.items() if key not in own}
    return constants, validated(RangeTable, {k: v for k, v in table.items() if k in own}, ("shift",))


def build_shift(law_table: LawTable, limits: RangeTable, temperature: Unit) -> ShiftLaw:
    """The law of a card in SI units, its measured range around it where one is given.

    Raises
    ------
    ParameterError
        Where a constant is not admissible.
    """
    law = law_table.build(temperature)
    if limits.measured is None:
        return law
    low, high = (temperature.to_si(T) for T in limits.measured)
    return MeasuredRange(law=law, low=low, high=high, outside=limits.outside)


def written_shift(law: ShiftLaw, temperature: Unit, *, like: LawTable | None = None) -> dict[str, Any]:
    """The ``[shift]`` table that reads back as `law`.

    Parameters
    ----------
    law : ShiftLaw
        A WLF, VFT, Arrhenius, tabulated or no shift law, with or without a measured range.
    temperature : Unit
        The unit to write temperatures in.
    like : LawTable, optional
        The table that the constants come from; its energy unit is kept.

    Raises
    ------
    ParameterError
        For a law that has no constants to write.
    """
    unit = temperature
    match law:
        case MeasuredRange(law=inner, low=low, high=high, outside=outside):
            table = written_shift(inner, unit, like=like)
            return {**table, "measured": [unit.from_si(low), unit.from_si(high)], "outside": outside}
        case NoShift():
            return {"law": "none", "T_ref": unit.from_si(law.T_ref)}
        case WLF():
            C2 = unit.difference_from_si(law.C2)
            return {"law": "wlf", "T_ref": unit.from_si(law.T_ref), "C1": law.C1, "C2": C2, "base": law.base}
        case VFT():
            B, T_inf = unit.difference_from_si(law.B), unit.from_si(law.T_inf)
            return {"law": "vft", "T_ref": unit.from_si(law.T_ref), "T_inf": T_inf, "B": B}
        case Arrhenius():
            name = getattr(like, "energy_unit", "kJ/mol")
            table = {
                "law": "arrhenius",
                "T_ref": unit.from_si(law.T_ref),
                "activation_energy": ENERGY[name].from_si(law.activation_energy),
                "energy_unit": name,
            }
            return table if law.gas_constant == GAS_CONSTANT else {**table, "gas_constant": law.gas_constant}
        case Table():
            points = [[unit.from_si(float(T)), float(a)] for T, a in zip(law.T, law.log10_a, strict=True)]
            return {"law": "table", "T_ref": unit.from_si(law.T_ref), "points": points}
        case Polynomial():
            scaled = [float(c) * unit.scale**k for k, c in enumerate(law.coefficients, start=1)]
            return {"law": "polynomial", "T_ref": unit.from_si(law.T_ref), "coefficients": scaled}
        case Crossover():
            below, above = (written_shift(part, unit) for part in (law.below, law.above))
            at, T_ref = unit.from_si(law.at), unit.from_si(law.T_ref)
            return {"law": "crossover", "at": at, "T_ref": T_ref, "below": below, "above": above}
    raise ParameterError("law", f"one that a card can be written with: {', '.join(LAW_TABLES)}", law.name)
