"""Invented pairs of cards with known slips: a right card, and the same with one or two mistakes in it."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable

import numpy as np

from matlib.card import Card, read_card
from matlib.card_conversion import card_text, convert_card
from matlib.errors import CardproofError
from matlib.shift import MeasuredRange
from matlib.shift.family import as_vft
from matlib.shift_tables import ArrheniusTable
from matlib.units import TEMPERATURE

LN10 = math.log(10.0)
Inject = Callable[[Card, np.random.Generator], Card | None]


def random_card(rng: np.random.Generator, folder, name: str, law: str | None = None) -> Card:
    """A card of invented constants in random units, states and laws, with relaxation inside its service window."""
    unit = str(rng.choice(["K", "degC", "degF"]))
    u = TEMPERATURE[unit]
    T_ref = round(float(rng.uniform(290.0, 390.0)), 0)
    law = law or str(rng.choice(["wlf", "vft", "arrhenius", "table"]))
    C1, C2 = float(rng.uniform(7.0, 16.0)), float(rng.uniform(80.0, 140.0))
    B, T_inf = LN10 * C1 * C2, T_ref - C2
    energy = float(rng.uniform(120.0, 300.0))
    ref = float(f"{u.from_si(T_ref):.10g}")
    if law == "wlf":
        shift = {"law": "wlf", "T_ref": ref, "C1": round(C1, 3), "C2": u.difference_from_si(round(C2, 1))}
    elif law == "vft" and rng.random() < 0.5:
        shift = {
            "law": "vft",
            "T_ref": ref,
            "T_inf": float(f"{u.from_si(T_inf):.6g}"),
            "B": u.difference_from_si(round(B, 1)),
        }
    elif law == "vft":
        Ea = round(B * 8.314462618 / 1000.0, 3)
        shift = {"law": "vft", "T_ref": ref, "T_inf": float(f"{u.from_si(T_inf):.6g}"), "activation_energy": Ea}
    elif law == "arrhenius":
        shift = {"law": "arrhenius", "T_ref": ref, "activation_energy": round(energy, 2)}
    else:
        T = np.linspace(T_ref - 40.0, T_ref + 40.0, 9)
        log10_a = [round(-C1 * (x - T_ref) / (C2 + x - T_ref), 3) for x in T]
        points = [[float(f"{u.from_si(float(x)):.8g}"), a] for x, a in zip(T, log10_a, strict=True)]
        shift = {"law": "table", "T_ref": ref, "points": points}
    n = int(rng.integers(4, 10))
    times = 10.0 ** np.sort(rng.uniform(-3.0, 5.0, n))
    shares = rng.dirichlet(np.ones(n)) * float(rng.uniform(0.5, 0.93))
    relative = str(rng.choice(["instantaneous", "long-term"]))
    state = str(rng.choice(["instantaneous", "long-term"]))
    scale = 1.0 if relative == "instantaneous" else 1.0 / (1.0 - shares.sum())
    rows = [[float(f"{t:.4g}"), float(f"{g * scale:.4g}")] for t, g in zip(times, shares, strict=True)]
    prony: dict = {"relative_to": relative, "shear": rows}
    if rng.random() < 0.6:
        prony["bulk"] = rows if rng.random() < 0.5 else [[t, 0.4 * g] for t, g in rows[1:]]
    stress = str(rng.choice(["MPa", "Pa", "GPa"]))
    E = float(f"{rng.uniform(800.0, 4000.0):.4g}") * {"MPa": 1.0, "Pa": 1e6, "GPa": 1e-3}[stress]
    tables = {
        "name": name,
        "units": {"stress": stress, "time": "s", "temperature": unit},
        "elastic": {"E": E, "nu": round(float(rng.uniform(0.3, 0.42)), 3), "state": state},
        "prony": prony,
        "shift": shift,
        "expansion": {"alpha": 6e-5 / u.difference_from_si(1.0)},
        "service": {"temperature": [u.from_si(T_ref - 35.0), u.from_si(T_ref + 35.0)], "time": [1e-2, 1e6]},
    }
    file = folder / f"{name}.card.toml"
    file.write_text(card_text(tables))
    return read_card(file)


def copy_of(card: Card, rng: np.random.Generator, folder) -> Card:
    """The same behaviour in another file: as it stands, or in another exact form and unit."""
    file = folder / "other.card.toml"
    law = card.shift()
    inner = law.law if isinstance(law, MeasuredRange) else law
    family = as_vft(inner) is not None and not isinstance(card.law_table, ArrheniusTable)
    if family and rng.random() < 0.5:
        converted = convert_card(card, str(rng.choice(["wlf", "vft"])))
        file.write_text(converted.text())
    else:
        file.write_text(card_text(_plain(card)))
    return read_card(file)


def _plain(card: Card) -> dict:
    return card.document.model_dump(exclude_unset=True)


def _law(card: Card, **changes) -> Card:
    return dataclasses.replace(card, law_table=card.law_table.model_copy(update=changes))


def _part(card: Card, part: str, **changes) -> Card:
    table = getattr(card.document, part).model_copy(update=changes)
    return dataclasses.replace(card, document=card.document.model_copy(update={part: table}))


def _times(card: Card, factor: float) -> Card:
    prony = card.document.prony
    rows = {k: [[factor * t, g] for t, g in getattr(prony, k)] for k in ("shear", "bulk") if getattr(prony, k)}
    return _part(card, "prony", **rows)


def _strength(card: Card, factor: float) -> Card | None:
    for key in ("C1", "B", "activation_energy"):
        value = getattr(card.law_table, key, None)
        if value is not None:
            return _law(card, **{key: value * factor})
    points = getattr(card.law_table, "points", None)
    return None if points is None else _law(card, points=[[T, factor * a] for T, a in points])


def log_base(card: Card, rng: np.random.Generator) -> Card | None:
    return _strength(card, float(rng.choice([LN10, 1.0 / LN10])))


def temperature_unit(card: Card, rng: np.random.Generator) -> Card | None:
    unit = card.temperature_unit
    meant = "degC" if unit.name == "K" else "K"
    points = getattr(card.law_table, "points", None)
    if points is not None:  # a table is used as it stands: its T_ref alone changes nothing
        return _law(card, points=[[TEMPERATURE[meant].from_si(unit.to_si(T)), a] for T, a in points])
    key = "T_inf" if getattr(card.law_table, "T_inf", None) is not None and rng.random() < 0.5 else "T_ref"
    value = getattr(card.law_table, key)
    return _law(card, **{key: TEMPERATURE[meant].from_si(unit.to_si(value))})


def reference_temperature(card: Card, rng: np.random.Generator) -> Card | None:
    if hasattr(card.law_table, "points"):
        return None
    step = float(rng.choice([-30.0, -20.0, 15.0, 25.0]))
    return _law(card, T_ref=card.law_table.T_ref + card.temperature_unit.difference_from_si(step))


def times_not_moved(card: Card, rng: np.random.Generator) -> Card | None:
    old = card.shift().T_ref
    new = old + float(rng.choice([-25.0, -15.0, 20.0, 30.0]))
    converted = convert_card(card, card.law_table.law, T_ref=new)
    file = card.file
    with open(file, "w") as stream:
        stream.write(converted.text())
    return _times(read_card(file), 1.0 / converted.conversion.time_factor)


def modulus_state(card: Card, rng: np.random.Generator) -> Card | None:
    state = card.document.elastic.state
    return _part(card, "elastic", state="long-term" if state == "instantaneous" else "instantaneous")


def fraction_base(card: Card, rng: np.random.Generator) -> Card | None:
    base = card.document.prony.relative_to
    return _part(card, "prony", relative_to="long-term" if base == "instantaneous" else "instantaneous")


def modulus_kind(card: Card, rng: np.random.Generator) -> Card | None:
    meant = str(rng.choice(["G", "K"]))
    if card.document.elastic.E is None:
        return None
    return _part(card, "elastic", **{"E": None, meant: card.document.elastic.E})


def time_unit(card: Card, rng: np.random.Generator) -> Card | None:
    factor = float(rng.choice([60.0, 3600.0, 1000.0]))
    return _times(card, factor if rng.random() < 0.5 else 1.0 / factor)


def stress_unit(card: Card, rng: np.random.Generator) -> Card | None:
    factor = float(rng.choice([1000.0, 1e6, 6894.757293168361]))
    factor = factor if rng.random() < 0.5 else 1.0 / factor
    given = card.document.elastic.given
    return _part(card, "elastic", **{key: value * factor for key, value in given.items() if key != "nu"})


def energy_unit(card: Card, rng: np.random.Generator) -> Card | None:
    if getattr(card.law_table, "activation_energy", None) is None:
        return None
    factor = float(rng.choice([4.184, 1.0 / 4.184]))
    return _law(card, activation_energy=card.law_table.activation_energy * factor)


def shift_direction(card: Card, rng: np.random.Generator) -> Card | None:
    return _strength(card, -1.0) if hasattr(card.law_table, "points") else None


def offset_dropped(card: Card, rng: np.random.Generator) -> Card | None:
    constants = as_vft(card.shift())
    if constants is None or constants.T_inf == 0.0:
        return None
    B = constants.B
    if rng.random() < 0.5:
        B *= (constants.T_ref / (constants.T_ref - constants.T_inf)) ** 2
    table = ArrheniusTable(law="arrhenius", T_ref=card.law_table.T_ref, activation_energy=B * 8.314462618 / 1000.0)
    return dataclasses.replace(card, law_table=table)


def bulk_relaxation(card: Card, rng: np.random.Generator) -> Card | None:
    prony = card.document.prony
    if prony.bulk is None:
        return _part(card, "prony", bulk=prony.shear)
    return _part(card, "prony", bulk=None) if prony.bulk == prony.shear else None


SLIPS: dict[str, Inject] = {
    "log-base": log_base,
    "temperature-unit": temperature_unit,
    "reference-temperature": reference_temperature,
    "times-not-moved": times_not_moved,
    "modulus-state": modulus_state,
    "fraction-base": fraction_base,
    "modulus-kind": modulus_kind,
    "time-unit": time_unit,
    "stress-unit": stress_unit,
    "energy-unit": energy_unit,
    "shift-direction": shift_direction,
    "offset-dropped": offset_dropped,
    "bulk-relaxation": bulk_relaxation,
}
LAWS = {
    "energy-unit": "arrhenius",
    "shift-direction": "table",
    "offset-dropped": "wlf",
    "times-not-moved": "wlf",
}


def slipped(seed: int, ids: tuple[str, ...], folder) -> tuple[Card, Card] | None:
    """A right card and one with the slips of `ids`; None where they cannot be made in it."""
    rng = np.random.default_rng(seed)
    law = next((LAWS[i] for i in ids if i in LAWS), None)
    right = random_card(rng, folder, "right", law)
    plain = any(i in ("reference-temperature", "energy-unit", "shift-direction", "offset-dropped") for i in ids)
    if plain:
        file = folder / "other.card.toml"
        file.write_text(card_text(_plain(right)))
        wrong: Card | None = read_card(file)
    else:
        wrong = copy_of(right, rng, folder)
    for name in ids:
        if wrong is not None:
            wrong = SLIPS[name](wrong, rng)
    if wrong is None:
        return None
    try:
        wrong.material()
    except CardproofError:
        return None
    return right, wrong
