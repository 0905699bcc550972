"""Slips in the shift law."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterator

import numpy as np

from drivers.studies.slips.proposal import Proposal, strength, with_law, with_prony, with_strength
from matlib.card import Card
from matlib.errors import CardproofError
from matlib.shift import MeasuredRange, ShiftLaw
from matlib.shift.family import as_vft
from matlib.shift_tables import ArrheniusTable, PolynomialTable, TableTable, VftTable, WlfTable
from matlib.units import ENERGY, GAS_CONSTANT, TEMPERATURE, Unit

__all__ = [
    "energy_unit",
    "log_base",
    "offset_dropped",
    "reference_temperature",
    "shift_direction",
    "temperature_unit",
    "times_not_moved",
]

LN10 = math.log(10.0)
ENERGY_FACTORS = {
    "kcal and kJ exchanged": 4.184,
    "J and kJ exchanged": 1000.0,
    "kJ/mol and eV exchanged": ENERGY["eV"].scale / 1000.0,
    "kcal/mol and eV exchanged": ENERGY["eV"].scale / ENERGY["kcal/mol"].scale,
}


def _number(value: float) -> str:
    return f"{value:.6g}"


def _key_of_law(card: Card) -> str:
    constant = strength(card)
    if constant is not None:
        return f"shift.{constant[0]}"
    return "shift.coefficients" if isinstance(card.law_table, PolynomialTable) else "shift.points"


def _scaled_law(card: Card, factor: float, because: str) -> Iterator[Proposal]:
    """The law with its strength multiplied, as a proposal that names the constant."""
    corrected, constant = with_strength(card, factor), strength(card)
    if corrected is None:
        return
    found = _number(constant[1]) if constant else "its values"
    fits = _number(factor * constant[1]) if constant else f"them multiplied by {factor:.6g}"
    yield Proposal(card=corrected, key=_key_of_law(card), found=found, fits=fits, because=because)


def log_base(card: Card, other: Card) -> Iterator[Proposal]:
    """A constant for logarithms to base e used with base 10, or the reverse: a factor ln 10."""
    for factor in (LN10, 1.0 / LN10):
        yield from _scaled_law(
            card, factor, "logarithms to base 10 and to base e were exchanged, a factor ln 10 = 2.3026"
        )


def energy_unit(card: Card, other: Card) -> Iterator[Proposal]:
    """An activation energy in another unit than the card says."""
    table = card.law_table
    if not isinstance(table, ArrheniusTable | VftTable):
        return
    for because, factor in ENERGY_FACTORS.items():
        for one in (factor, 1.0 / factor):
            yield from _scaled_law(card, one, f"the unit of the activation energy was mistaken ({because})")
    if isinstance(table, VftTable) and table.B is not None:
        for one in (GAS_CONSTANT, 1.0 / GAS_CONSTANT):
            yield from _scaled_law(card, one, "an activation energy was taken for B = Ea/R, or the reverse")


def _misread(value: float, unit: Unit) -> Iterator[tuple[float, str]]:
    """The temperature as it reads where the number is in another unit than the card's."""
    for name, meant in TEMPERATURE.items():
        if name != unit.name:
            yield unit.from_si(meant.to_si(value)), f"the number is in {name}, but the card's unit is {unit.name}"


def temperature_unit(card: Card, other: Card) -> Iterator[Proposal]:
    """A temperature that is in another unit than the card's, alone or together with the others."""
    table, unit = card.law_table, card.temperature_unit
    keys = [key for key in ("T_ref", "T_inf") if getattr(table, key, None) is not None]
    for key in keys:
        value = float(getattr(table, key))
        for fits, because in _misread(value, unit):
            yield _moved(card, {key: fits}, because)
    if len(keys) == 2:
        for (first, because), (second, _) in zip(
            _misread(float(getattr(table, keys[0])), unit), _misread(float(getattr(table, keys[1])), unit), strict=True
        ):
            yield _moved(card, {keys[0]: first, keys[1]: second}, because)
    if isinstance(table, WlfTable):
        for shift in (-273.15, 273.15):
            fits = table.C2 + shift / unit.scale
            yield _moved(
                card, {"C2": fits}, "C2 is a difference, but 273.15 K was added or taken off as for a temperature"
            )
        yield from _scaled_difference(card, "C2", table.C2, unit)
    if isinstance(table, VftTable) and table.B is not None:
        yield from _scaled_difference(card, "B", table.B, unit)
    if isinstance(table, TableTable):
        for (_, because), name in zip(_misread(0.0, unit), [n for n in TEMPERATURE if n != unit.name], strict=True):
            points = [[unit.from_si(TEMPERATURE[name].to_si(T)), a] for T, a in table.points]
            corrected = with_law(card, points=points)
            yield Proposal(
                card=corrected,
                key="shift.points",
                found="its temperatures",
                fits=f"them read in {name}",
                because=because,
            )


def _scaled_difference(card: Card, key: str, value: float, unit: Unit) -> Iterator[Proposal]:
    for factor in (1.8, 1.0 / 1.8):
        yield _moved(
            card, {key: value * factor}, "a temperature difference was taken in degF for one in K, or the reverse"
        )


def _moved(card: Card, changes: dict[str, float], because: str) -> Proposal:
    found = ", ".join(f"{key} = {_number(float(getattr(card.law_table, key)))}" for key in changes)
    fits = ", ".join(f"{key} = {_number(value)}" for key, value in changes.items())
    key = " and ".join(f"shift.{key}" for key in changes)
    return Proposal(card=with_law(card, **changes), key=key, found=found, fits=fits, because=because)


def _law(card: Card) -> ShiftLaw | None:
    """The law without its measured range; None where its constants are not admissible."""
    try:
        law = card.shift()
    except CardproofError:
        return None
    return law.law if isinstance(law, MeasuredRange) else law


def reference_temperature(card: Card, other: Card) -> Iterator[Proposal]:
    """Constants copied, with a T_ref that is not the one they belong to."""
    law = _law(other)
    if law is None or getattr(card.law_table, "T_ref", None) is None:
        return
    T_ref = float(f"{card.temperature_unit.from_si(law.T_ref):.12g}")
    if not math.isclose(T_ref, float(card.law_table.T_ref), rel_tol=1e-9, abs_tol=1e-9):  # type: ignore[attr-defined]
        yield _moved(card, {"T_ref": T_ref}, "the constants were copied, but belong to another reference temperature")


def times_not_moved(card: Card, other: Card) -> Iterator[Proposal]:
    """The reference and its constants moved, the relaxation times left behind."""
    own, foreign = _law(card), _law(other)
    if own is None or foreign is None or card.document.prony is None:
        return
    for law, T in ((foreign, own.T_ref), (own, foreign.T_ref)):
        try:
            ln_factor = float(law.ln_shift(T))
        except CardproofError:
            continue
        if 1e-6 < abs(ln_factor) < 500.0:
            for sign in (1.0, -1.0):
                yield scaled_times(
                    card,
                    math.exp(sign * ln_factor),
                    "the reference temperature was moved, but the relaxation times were left behind (or the reverse)",
                )


def scaled_times(card: Card, factor: float, because: str) -> Proposal:
    """Every relaxation time multiplied."""
    prony = card.document.prony
    assert prony is not None
    rows = {
        name: [[factor * t, g] for t, g in getattr(prony, name)]
        for name in ("shear", "bulk", "young")
        if getattr(prony, name) is not None
    }
    name, first = next(iter(rows.items()))
    return Proposal(
        card=with_prony(card, **rows),
        key=f"prony.{name} and all relaxation times",
        found=f"first time {_number(first[0][0] / factor)}",
        fits=f"{_number(first[0][0])}, every time multiplied by {factor:.6g}",
        because=because,
    )


def shift_direction(card: Card, other: Card) -> Iterator[Proposal]:
    """The reciprocal of a_T."""
    if isinstance(card.law_table, PolynomialTable | TableTable):
        yield from _scaled_law(card, -1.0, "the reciprocal of a_T was entered: a_T has to fall as temperature rises")


def offset_dropped(card: Card, other: Card) -> Iterator[Proposal]:
    """An offset law passed on as plain Arrhenius, its T_inf lost."""
    table, foreign = card.law_table, _law(other)
    constants = None if foreign is None else as_vft(foreign)
    if not isinstance(table, ArrheniusTable) or constants is None or abs(constants.T_inf) < 1e-6:
        return
    unit = card.temperature_unit
    B = ENERGY[table.energy_unit].to_si(table.activation_energy) / table.gas_constant
    T_ref = unit.to_si(table.T_ref)
    at_slope = B * ((T_ref - constants.T_inf) / T_ref) ** 2
    because = "an offset law was passed on as plain Arrhenius, its T_inf lost"
    for strength_B, how in ((B, ""), (at_slope, ", the slope at T_ref kept")):
        yield _offset(card, strength_B, constants.T_inf, because + how)
    window = np.linspace(*(other.service_temperature or (T_ref - 30.0, T_ref + 30.0)), 50)
    window = window[window > constants.T_inf + 1.0]
    apparent = constants.B * (window / (window - constants.T_inf)) ** 2
    if window.size and apparent.min() <= B <= apparent.max():
        yield _offset(card, constants.B, constants.T_inf, because + ", the energy fitted to some part of the range")


def _offset(card: Card, B: float, T_inf: float, because: str) -> Proposal:
    table, unit = card.law_table, card.temperature_unit
    assert isinstance(table, ArrheniusTable)
    law = VftTable(
        law="vft", T_ref=table.T_ref, T_inf=float(f"{unit.from_si(T_inf):.12g}"), B=unit.difference_from_si(B)
    )
    fits = f"law vft with T_inf = {_number(law.T_inf)}, B = {_number(law.B or 0.0)}"
    return Proposal(
        card=dataclasses.replace(card, law_table=law), key="shift.law", found="arrhenius", fits=fits, because=because
    )
