"""A card converted to another shift law, reference temperature or unit, and written as a new card."""

from __future__ import annotations

import copy
import math
from dataclasses import dataclass
from typing import Any, Literal

from matlib.card import Card, parse_card, plain
from matlib.errors import ConversionError, FileError, ShiftRangeError
from matlib.shift.base import ShiftLaw
from matlib.shift.conversion import Conversion, FitMethod, convert_law, fits_points
from matlib.shift.difference import largest_difference_decades
from matlib.shift_tables import written_shift
from matlib.units import STRESS, TEMPERATURE, TIME, Unit

__all__ = ["ConvertedCard", "convert_card"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ConvertedCard:
    """A new card and how it was made.

    Parameters
    ----------
    conversion : Conversion
    source : str
        The card that it was made from.
    tables : dict
        The new card as plain tables, in its own units.
    service_error : (float, float), optional
        Largest error of ``log10 a_T`` over the service window, and where [K]. None where the conversion is exact, was made
        for all of the window, the card has none, or a law has no answer in part of it.
    """

    conversion: Conversion
    source: str
    tables: dict[str, Any]
    service_error: tuple[float, float] | None = None

    @property
    def shift(self) -> dict[str, Any]:
        """The new ``[shift]`` table."""
        return dict(self.tables["shift"])

    @property
    def units(self) -> dict[str, str]:
        """The new ``[units]`` table."""
        return dict(self.tables["units"])

    def text(self) -> str:
        """The new card as TOML."""
        return card_text(self.tables)


def convert_card(
    card: Card,
    to: str,
    *,
    T_ref: float | None = None,
    T_range: tuple[float, float] | None = None,
    points: int | None = None,
    base: Literal[10, "e"] | None = None,
    units: tuple[Unit, ...] = (),
    fit: FitMethod | None = None,
) -> ConvertedCard:
    """Write a card with another shift law, about another reference temperature, in other units.

    Parameters
    ----------
    card : Card
        Whose constants are a material.
    to : str
        ``wlf``, ``vft``, ``arrhenius`` or ``table``; or the card's own law.
    T_ref : float, optional
        New reference temperature [K]; relaxation times move along.
    T_range : tuple of float, optional
        Temperatures that an inexact conversion is made for [K]; else the measured range, else the service window (a
        least-squares fit takes all points of the table).
    points : int, optional
        Temperatures of a table.
    base : {10, "e"}, optional
        Logarithm that WLF constants are written for.
    units : tuple of Unit, optional
        Units of the new card that differ from the old.
    fit : {"least-squares", "minimax"}, optional
        How constants are found where no exact ones exist: see `convert_law`.

    Returns
    -------
    ConvertedCard

    Raises
    ------
    FileError
        If the card is no material.
    ConversionError
        If there is no such conversion, it needs a range, or the new card would have numbers that no card may have.
    """
    law = card.material().shift
    if T_range is None and card.limits.measured is None and not fits_points(law, to, fit):
        T_range = card.service_temperature
    conversion = convert_law(law, to, T_ref=T_ref, T_range=T_range, points=points, base=base, fit=fit)
    names = _new_units(card, units)
    tables = _in_units(plain(card.document), card, names, conversion.time_factor)
    temperature = TEMPERATURE[names["temperature"]]
    shift = written_shift(conversion.law, temperature, like=card.law_table)
    tables["shift"] = _neat(shift, temperature)
    tables["made_from"] = _origin(card, conversion, temperature)
    try:
        parse_card(tables, card.file).material()
    except FileError as error:
        raise ConversionError(f"the converted card would be none: {error.faults[0]}") from None
    return ConvertedCard(
        conversion=conversion,
        source=card.file,
        tables=tables,
        service_error=_service_error(law, conversion, card.service_temperature),
    )


def _service_error(
    law: ShiftLaw, conversion: Conversion, window: tuple[float, float] | None
) -> tuple[float, float] | None:
    if conversion.fitted_range is None or window is None:
        return None
    (low, high), (cold, hot) = conversion.fitted_range, window
    if low <= cold and hot <= high:
        return None
    try:
        return largest_difference_decades(law, conversion.law, cold, hot, time_factor=conversion.time_factor)
    except ShiftRangeError:
        return None


def _new_units(card: Card, units: tuple[Unit, ...]) -> dict[str, str]:
    names = card.document.units.model_dump()
    changed: dict[str, str] = {}
    for unit in units:
        quantity = next(
            q for q, known in (("stress", STRESS), ("time", TIME), ("temperature", TEMPERATURE)) if unit.name in known
        )
        if quantity in changed:
            raise ConversionError(f"two {quantity} units: {changed[quantity]} and {unit.name}; give one")
        changed[quantity] = unit.name
    return {**names, **changed}


def _in_units(tables: dict[str, Any], card: Card, names: dict[str, str], time_factor: float) -> dict[str, Any]:
    """All tables but the shift law, in new units; relaxation times moved along with the reference."""
    new = copy.deepcopy(tables)
    new["units"] = names
    stress = card.stress_unit.scale / STRESS[names["stress"]].scale
    time = card.time_unit.scale / TIME[names["time"]].scale
    degree = card.temperature_unit.scale / TEMPERATURE[names["temperature"]].scale
    for key in ("E", "G", "K"):
        if key in new["elastic"]:
            new["elastic"][key] = _scaled(new["elastic"][key], stress)
    prony = new.get("prony", {})
    share = stress if prony.get("relative_to") == "absolute" else 1.0
    for key in ("shear", "bulk", "young"):
        if prony.get(key) is not None:
            prony[key] = [[_scaled(t, time * time_factor), _scaled(g, share)] for t, g in prony[key]]
    if "expansion" in new:
        new["expansion"]["alpha"] = _scaled(new["expansion"]["alpha"], 1.0 / degree)
    if "service" in new:
        new["service"]["time"] = [_scaled(t, time) for t in new["service"]["time"]]
        if degree != 1.0 or card.temperature_unit.name != names["temperature"]:
            unit = TEMPERATURE[names["temperature"]]
            T = [unit.from_si(card.temperature_unit.to_si(value)) for value in new["service"]["temperature"]]
            new["service"]["temperature"] = [_rounded(value, unit) for value in T]
    return new


def _scaled(value: float, factor: float) -> float:
    """Scale without touching the digits where there is nothing to scale."""
    return value if factor == 1.0 else value * factor


def _rounded(value: float, unit: Unit) -> float:
    """A temperature without the digits that the zero point of its unit leaves behind: 80.0 for 79.99999999999994."""
    kelvin = unit.to_si(value)
    for digits in range(1, 16):
        short = float(f"{value:.{digits}g}")
        if abs(unit.to_si(short) - kelvin) <= 2.0 * math.ulp(kelvin):
            return short
    return value


def _neat(shift: dict[str, Any], unit: Unit) -> dict[str, Any]:
    neat = dict(shift)
    for key, value in shift.items():
        match key:
            case "T_ref" | "T_inf" | "at":
                neat[key] = _rounded(value, unit)
            case "measured":
                neat[key] = [_rounded(T, unit) for T in value]
            case "points":
                neat[key] = [[_rounded(T, unit), a] for T, a in value]
            case "below" | "above":
                neat[key] = _neat(value, unit)
    return neat


def _origin(card: Card, conversion: Conversion, temperature: Unit) -> dict[str, Any]:
    """The ``[made_from]`` table: what the card was made from and whether it says the same."""
    law = card.law_table.model_dump().get("law", "")
    origin: dict[str, Any] = {
        "card": card.document.name,
        "revision": card.document.revision,
        "law": law,
        "exact": conversion.exact,
    }
    if not conversion.exact:
        origin["method"] = conversion.method
        origin["largest_error_decades"] = conversion.largest_error_decades
        if conversion.error_at is not None:
            origin["error_at"] = _rounded(temperature.from_si(conversion.error_at), temperature)
        if conversion.fitted_range is not None:
            origin["range"] = [_rounded(temperature.from_si(T), temperature) for T in conversion.fitted_range]
    if conversion.note or conversion.support:
        origin["note"] = ". ".join(text for text in (conversion.note, conversion.support) if text)
    return origin


def card_text(tables: dict[str, Any]) -> str:
    """Plain tables as TOML, in the order in which a card is read; series one term a line.

    Parameters
    ----------
    tables : dict

    Returns
    -------
    text : str
    """
    import tomlkit

    document = tomlkit.document()
    for key, value in tables.items():
        if not isinstance(value, dict):
            document.add(key, tomlkit.item(value))
    for key, value in tables.items():
        if isinstance(value, dict):
            document.add(tomlkit.nl())
            document.add(key, _table(value))
    return tomlkit.dumps(document)


def _table(values: dict[str, Any]) -> Any:
    import tomlkit

    table = tomlkit.table()
    for key, value in values.items():
        if value is None:
            continue
        if isinstance(value, dict):
            table.add(key, _table(value))
        elif isinstance(value, list) and value and isinstance(value[0], list):
            table.add(key, _rows(value))
        else:
            table.add(key, tomlkit.item(value))
    return table


def _rows(rows: list[list[float]]) -> Any:
    import tomlkit

    array = tomlkit.array()
    for row in rows:
        array.append(row)
    return array.multiline(True)
