"""What is wrong with the constants of a card, in the card's own keys and units."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterator

from matlib.card_schema import CardDocument, PronyTable
from matlib.elastic import elastic_constants
from matlib.errors import Fault, ParameterError
from matlib.files import shown
from matlib.prony import FULL_SUM
from matlib.shift_tables import CrossoverTable, LawTable, RangeTable, TableTable, VftTable, parse_shift
from matlib.units import TEMPERATURE, Unit

__all__ = ["MODULUS_OF", "constant_faults", "contradictions"]

MODULUS_OF = {"shear": "G", "bulk": "K", "young": "E"}
"""The elastic constant that each series belongs to."""

Named = tuple[str, Fault]


def contradictions(document: CardDocument) -> list[Fault]:
    """Tables that are well formed each, but cannot stand together."""
    faults = []
    given = document.elastic.given
    if len(given) != 2:
        found = ", ".join(given) or "nothing"
        faults.append(Fault(key="elastic", found=found, expected="exactly two of E, G, K, nu"))
    if document.prony is not None:
        faults += _series_contradictions(document.prony)
    service = document.service
    if service is not None:
        faults += _range_faults("service.temperature", service.temperature, positive=False)
        faults += _range_faults("service.time", service.time, positive=True)
        unit = TEMPERATURE[document.units.temperature]
        if unit.to_si(min(service.temperature)) <= 0.0:
            faults.append(
                Fault(key="service.temperature", found=shown(service.temperature), expected=_above_zero(unit))
            )
    return faults


def _series_contradictions(prony: PronyTable) -> Iterator[Fault]:
    if prony.young is None:
        if prony.lateral is not None:
            yield Fault(key="prony.lateral", found=shown(prony.lateral), expected="no such key without young")
        if prony.shear is None and prony.bulk is None:
            yield Fault(key="prony", found="no series", expected="shear, bulk or young")
        return
    if prony.shear is not None or prony.bulk is not None:
        yield Fault(key="prony", found="young beside shear or bulk", expected="either young, or shear and bulk")
    if prony.lateral is None:
        expected = '"constant nu" or "constant K": what was assumed about the other modulus'
        yield Fault(key="prony.lateral", found="nothing", expected=expected, hint="add the key")


def _range_faults(key: str, values: list[float], *, positive: bool) -> list[Fault]:
    if positive and not min(values) > 0.0:
        return [Fault(key=key, found=shown(values), expected="[shortest, longest], both > 0")]
    if not values[0] <= values[1]:
        return [Fault(key=key, found=shown(values), expected="the smaller value first", hint="swap the two")]
    return []


def constant_faults(document: CardDocument, law_table: LawTable, limits: RangeTable) -> list[Named]:
    """What the physics forbids among the constants as they are written, with the id of the finding.

    Parameters
    ----------
    document : CardDocument
    law_table : LawTable
    limits : RangeTable

    Returns
    -------
    faults : list of (id, Fault)
        Empty for constants of the right sign and order.
    """
    unit = TEMPERATURE[document.units.temperature]
    faults = [
        ("elastic-constants", Fault(key=f"elastic.{name}", found=f"{value:g}", expected="a modulus > 0"))
        for name, value in document.elastic.given.items()
        if name != "nu" and not value > 0.0
    ]
    faults += [] if document.prony is None else _series_faults(document, document.prony)
    faults += _law_faults(law_table, "shift", unit)
    if limits.measured is not None and not unit.to_si(limits.measured[0]) > 0.0:
        found = shown(limits.measured)
        faults.append(("below-absolute-zero", Fault(key="shift.measured", found=found, expected=_above_zero(unit))))
    return faults


def _series_faults(document: CardDocument, prony: PronyTable) -> Iterator[Named]:
    what = "modulus" if prony.relative_to == "absolute" else "fraction"
    for name in MODULUS_OF:
        rows: list[list[float]] = getattr(prony, name) or []
        for k, (time, share) in enumerate(rows, start=1):
            key = f"prony.{name}[{k}]"
            if not time > 0.0:
                yield "time-not-positive", Fault(key=key, found=f"{time:g}", expected="a relaxation time > 0")
            if not share > 0.0:
                yield "fraction-not-positive", Fault(key=key, found=f"{share:g}", expected=f"a {what} > 0")
        if rows and all(share > 0.0 for _, share in rows):
            yield from _sum_faults(document, prony, name, math.fsum(share for _, share in rows))


def _sum_faults(document: CardDocument, prony: PronyTable, name: str, total: float) -> Iterator[Named]:
    """Terms that take more than the modulus they are part of, or leave nothing to scale the long-term one by."""
    instantaneous = document.elastic.state == "instantaneous"
    key, what = f"prony.{name}", "moduli" if prony.relative_to == "absolute" else "fractions"
    found = f"{what} with a sum of {total:.6g}"
    if prony.relative_to == "instantaneous" and not instantaneous:
        if not total < 1.0:
            hint = 'write state = "instantaneous" with instantaneous constants'
            expected = "a sum < 1, since the elastic constants are the long-term ones"
            yield "fractions-reach-one", Fault(key=key, found=found, expected=expected, hint=hint)
        return
    if prony.relative_to == "long-term" or not instantaneous:
        return
    limit = 1.0
    if prony.relative_to == "absolute":
        try:
            limit = getattr(elastic_constants(**document.elastic.given), MODULUS_OF[name])
        except ParameterError:
            return  # the elastic constants are at fault, and say so
    if total > limit * (1.0 + FULL_SUM):
        expected = f"a sum of at most {limit:.6g}" + (", the instantaneous modulus" if what == "moduli" else "")
        yield "fractions-reach-one", Fault(key=key, found=found, expected=expected, hint="look at prony.relative_to")


def _law_faults(table: LawTable, key: str, unit: Unit) -> Iterator[Named]:
    for name in table.positive:
        value = getattr(table, name)
        if value is not None and not value > 0.0:
            yield "constant-sign", Fault(key=f"{key}.{name}", found=f"{value:g}", expected="a number > 0")
    for name, T in _temperatures(table):
        if not unit.to_si(T) > 0.0:
            yield "below-absolute-zero", Fault(key=f"{key}.{name}", found=f"{T:g}", expected=_above_zero(unit))
    match table:
        case TableTable(points=points):
            for T, times in Counter(row[0] for row in points).items():
                if times > 1:
                    found = f"{T:g} {unit.name} {times} times"
                    yield "shift-law", Fault(key=f"{key}.points", found=found, expected="each temperature once")
        case VftTable(T_ref=T_ref, T_inf=T_inf) if not T_inf < T_ref:
            expected = f"below T_ref = {T_ref:g} {unit.name}"
            yield "shift-law", Fault(key=f"{key}.T_inf", found=f"{T_inf:g} {unit.name}", expected=expected)
        case CrossoverTable(below=below, above=above):
            for side, inner in (("below", below), ("above", above)):
                yield from _law_faults(parse_shift(inner, ("shift", side)), f"shift.{side}", unit)


def _temperatures(table: LawTable) -> Iterator[tuple[str, float]]:
    """Temperatures that have to lie above absolute zero, with their keys; T_inf need not."""
    for name in ("T_ref", "at"):
        T = getattr(table, name, None)
        if T is not None:
            yield name, T
    if isinstance(table, TableTable):
        for k, (T, _) in enumerate(table.points, start=1):
            yield f"points[{k}]", T


def _above_zero(unit: Unit) -> str:
    return f"above absolute zero, {unit.from_si(0.0):g} {unit.name}"
