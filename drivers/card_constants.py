"""The constants of a card one by one: their keys, what they measure, and the card with other values."""

from __future__ import annotations

import copy
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal

from matlib.card import Card, parse_card, plain
from matlib.units import difference_name

__all__ = ["Constant", "constants", "in_units_of", "with_constants"]

Quantity = Literal["stress", "time", "temperature", "per temperature", "difference", "number"]

POINTS: dict[str, Quantity] = {"T_ref": "temperature", "T_inf": "temperature", "at": "temperature"}
DIFFERENCES: dict[str, Quantity] = {"C2": "difference", "B": "difference"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Constant:
    """One constant as a card states it.

    Parameters
    ----------
    key : str
        As messages write it, counted from one: ``shift.C1``, ``prony.shear[3].fraction``.
    value : float, int or str
        In the card's own unit; a text such as ``wlf`` where the key takes one.
    quantity : str
        What it measures; "number" where no unit applies.
    power : int
        For "per temperature": of which power of the temperature unit.
    place : tuple
        Where it stands in the card's tables.
    """

    key: str
    value: float | int | str
    quantity: Quantity
    place: tuple[str | int, ...]
    power: int = 1

    def unit_name(self, card: Card) -> str:
        """The unit in which `card` states it; empty where there is none."""
        units = card.document.units
        match self.quantity:
            case "stress":
                return units.stress
            case "time":
                return units.time
            case "temperature":
                return units.temperature
            case "difference":
                return difference_name(units.temperature)
            case "per temperature":
                return f"1/{difference_name(units.temperature)}" + (f"^{self.power}" if self.power > 1 else "")
        return ""


def constants(card: Card) -> dict[str, Constant]:
    """Every constant that the behaviour of a card hangs on, in the order of the file.

    Parameters
    ----------
    card : Card

    Returns
    -------
    found : dict
        By key. Names, notes and the service window are no constants, nor is a measured range that the law goes beyond.
    """
    tables = plain(card.document)
    found = [*_elastic(tables), *_prony(tables), *_law(tables["shift"], ("shift",))]
    if "expansion" in tables:
        alpha = tables["expansion"]["alpha"]
        place = ("expansion", "alpha")
        found.append(Constant(key="expansion.alpha", value=alpha, quantity="per temperature", place=place))
    return {constant.key: constant for constant in found}


def _elastic(tables: dict[str, Any]) -> Iterator[Constant]:
    for name, value in tables["elastic"].items():
        quantity: Quantity = "stress" if name in ("E", "G", "K") else "number"
        if value is not None:
            yield Constant(key=f"elastic.{name}", value=value, quantity=quantity, place=("elastic", name))


def _prony(tables: dict[str, Any]) -> Iterator[Constant]:
    prony = tables.get("prony") or {}
    share: Quantity = "stress" if prony.get("relative_to") == "absolute" else "number"
    for name, value in prony.items():
        if isinstance(value, str):
            yield Constant(key=f"prony.{name}", value=value, quantity="number", place=("prony", name))
            continue
        for k, (time, fraction) in enumerate(value or []):
            key, place = f"prony.{name}[{k + 1}]", ("prony", name, k)
            yield Constant(key=f"{key}.time", value=time, quantity="time", place=(*place, 0))
            yield Constant(key=f"{key}.fraction", value=fraction, quantity=share, place=(*place, 1))


def _law(table: Mapping[str, Any], place: tuple[str, ...]) -> Iterator[Constant]:
    prefix = ".".join(place)
    beyond = table.get("outside", "extrapolate") != "extrapolate"
    for name, value in table.items():
        if name in ("measured", "outside") and not beyond:
            continue
        key, here = f"{prefix}.{name}", (*place, name)
        if isinstance(value, Mapping):
            yield from _law(value, here)
        elif name == "measured":
            for k, T in enumerate(value):
                yield Constant(key=f"{key}[{k + 1}]", value=T, quantity="temperature", place=(*here, k))
        elif name == "points":
            for k, (T, log10_a) in enumerate(value):
                yield Constant(key=f"{key}[{k + 1}].T", value=T, quantity="temperature", place=(*here, k, 0))
                yield Constant(key=f"{key}[{k + 1}].log10_a", value=log10_a, quantity="number", place=(*here, k, 1))
        elif name == "coefficients":
            for k, c in enumerate(value, start=1):
                at: tuple[str | int, ...] = (*here, k - 1)
                yield Constant(key=f"{key}[{k}]", value=c, quantity="per temperature", place=at, power=k)
        elif isinstance(value, int | float | str) and not isinstance(value, bool):
            quantity = POINTS.get(name) or DIFFERENCES.get(name) or "number"
            yield Constant(key=key, value=value, quantity=quantity, place=here)


def in_units_of(card: Card, constant: Constant, source: Card) -> float | int | str:
    """A constant of `source` as a number in the units of `card`; unchanged to the digit where both have the same.

    Examples
    --------
    >>> from matlib.card import parse_card
    >>> tables = {"name": "r", "units": {"stress": "MPa", "time": "s", "temperature": "degC"},
    ...           "elastic": {"E": 3000.0, "nu": 0.3, "state": "instantaneous"}, "shift": {"law": "none"}}
    >>> source = parse_card(tables, "a")
    >>> other = parse_card(tables | {"units": {"stress": "GPa", "time": "s", "temperature": "degC"}}, "b")
    >>> in_units_of(other, constants(source)["elastic.E"], source)
    3.0
    """
    value = constant.value
    if isinstance(value, str) or constant.unit_name(card) == constant.unit_name(source):
        return value
    old, new = source.temperature_unit, card.temperature_unit
    match constant.quantity:
        case "stress":
            return card.stress_unit.from_si(source.stress_unit.to_si(value))
        case "time":
            return card.time_unit.from_si(source.time_unit.to_si(value))
        case "temperature":
            return new.from_si(old.to_si(value))
        case "difference":
            return new.difference_from_si(old.difference_to_si(value))
        case "per temperature":
            return value * (new.scale / old.scale) ** constant.power
    return value


def with_constants(card: Card, values: Mapping[str, float | int | str]) -> Card:
    """The card with other values at some keys.

    Parameters
    ----------
    card : Card
    values : mapping
        By key, each in the card's own unit.

    Returns
    -------
    changed : Card

    Raises
    ------
    KeyError
        For a key that the card does not have.
    FileError
        If what comes out is no card.
    """
    known = constants(card)
    tables = copy.deepcopy(plain(card.document))
    for key, value in values.items():
        *path, last = known[key].place
        table: Any = tables
        for step in path:
            table = table[step]
        table[last] = value
    return parse_card(tables, card.file)
