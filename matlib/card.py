"""A card file and the material that it describes."""

from __future__ import annotations

import math
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from matlib.arrays import frozen
from matlib.card_faults import constant_faults, contradictions
from matlib.card_schema import CardDocument, PronyTable
from matlib.documents import validated
from matlib.effective import shear_and_bulk_of_young
from matlib.elastic import ElasticConstants, elastic_constants
from matlib.errors import Fault, FaultyInputError, FileError, ParameterError, ShiftRangeError
from matlib.files import read_toml, require_kind
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import PluginError, ShiftLaw
from matlib.shift_tables import LawTable, RangeTable, build_shift, parse_shift, split_range
from matlib.units import STRESS, TEMPERATURE, TIME, Unit

__all__ = ["Card", "parse_card", "plain", "read_card"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Card:
    """A card as it was read: its constants in its own units, and how to make a material of them.

    Parameters
    ----------
    file : str
        Where it was read from, as the user named it.
    document : CardDocument
        The constants in the file's units.
    law_table : LawTable
        The shift law's constants in the file's units.
    limits : RangeTable
        Where the law was measured, and what holds beyond.
    """

    file: str
    document: CardDocument
    law_table: LawTable
    limits: RangeTable

    @property
    def name(self) -> str:
        """The card's name and revision."""
        revision = self.document.revision
        return f"{self.document.name}, revision {revision}" if revision else self.document.name

    @property
    def stress_unit(self) -> Unit:
        """Unit of the moduli."""
        return STRESS[self.document.units.stress]

    @property
    def time_unit(self) -> Unit:
        """Unit of the relaxation times."""
        return TIME[self.document.units.time]

    @property
    def temperature_unit(self) -> Unit:
        """Unit of temperatures and their differences."""
        return TEMPERATURE[self.document.units.temperature]

    @property
    def service_temperature(self) -> tuple[float, float] | None:
        """Lowest and highest service temperature [K], where the card states them."""
        service = self.document.service
        if service is None:
            return None
        low, high = (self.temperature_unit.to_si(T) for T in service.temperature)
        return low, high

    @property
    def service_time(self) -> tuple[float, float] | None:
        """Shortest and longest service time [s], where the card states them."""
        service = self.document.service
        if service is None:
            return None
        low, high = (self.time_unit.to_si(t) for t in service.time)
        return low, high

    def shift(self) -> ShiftLaw:
        """Make the shift law; `FileError` where its constants are not admissible."""
        faults: list[Fault] = []
        with _collected(faults, "shift"):
            return build_shift(self.law_table, self.limits, self.temperature_unit)
        raise FileError(self.file, faults)

    def constant_faults(self) -> list[tuple[str, Fault]]:
        """What the physics forbids among the constants as they are written, with the id of the finding."""
        return constant_faults(self.document, self.law_table, self.limits)

    def material(self) -> Material:
        """Make the material of this card, in SI units.

        Returns
        -------
        Material

        Raises
        ------
        FileError
            With everything that keeps the constants from being a material.
        """
        faults = [fault for _, fault in self.constant_faults()]
        faulty_tables = {fault.key.partition(".")[0] for fault in faults}
        shift, series, expansion = None, None, 0.0
        if "shift" not in faulty_tables:
            with _collected(faults, "shift"):
                shift = build_shift(self.law_table, self.limits, self.temperature_unit)
        if "elastic" not in faulty_tables:
            with _collected(faults, "elastic"):
                elastic = self._elastic()
                if "prony" not in faulty_tables:
                    with _collected(faults, "prony"):
                        series = self._shear_and_bulk(elastic)
        if self.document.expansion is not None:
            expansion = self.document.expansion.alpha / self.temperature_unit.scale
        if shift is None or series is None:
            raise FileError(self.file, faults)
        shear, bulk = series
        return Material(shear=shear, bulk=bulk, shift=shift, expansion=expansion)

    def _elastic(self) -> ElasticConstants:
        given = self.document.elastic.given
        scale = self.stress_unit.scale
        return elastic_constants(**{name: v if name == "nu" else v * scale for name, v in given.items()})

    def _shear_and_bulk(self, elastic: ElasticConstants) -> tuple[PronySeries, PronySeries]:
        prony = self.document.prony
        if prony is None:
            return PronySeries.elastic(elastic.G), PronySeries.elastic(elastic.K)
        if prony.young is None:
            return self._series("shear", elastic.G, prony), self._series("bulk", elastic.K, prony)
        young = self._series("young", elastic.E, prony)
        if prony.lateral == "constant nu":
            return shear_and_bulk_of_young(young, nu=elastic.nu)
        if not young.instantaneous < 9.0 * elastic.K:
            E, K = (self.stress_unit.from_si(value) for value in (young.instantaneous, elastic.K))
            found = f'"constant K" with an instantaneous E of {E:g} {self.stress_unit.name}'
            hint = 'write lateral = "constant nu", or look at elastic.state'
            raise ParameterError("lateral", f"E below 9 K = {9.0 * K:g} {self.stress_unit.name}", found, hint)
        return shear_and_bulk_of_young(young, K=elastic.K)

    def _series(self, name: str, modulus: float, prony: PronyTable) -> PronySeries:
        """One series from its rows and the elastic constant of the stated limit."""
        rows = getattr(prony, name)
        if not rows:
            return PronySeries.elastic(modulus)
        times = [self.time_unit.to_si(row[0]) for row in rows]
        shares = np.array([row[1] for row in rows])
        total, instantaneous = math.fsum(shares), self.document.elastic.state == "instantaneous"
        match prony.relative_to, instantaneous:
            case "instantaneous", True:
                return PronySeries.from_fractions(modulus, shares, times)
            case "instantaneous", False:
                return PronySeries.from_fractions(modulus / (1.0 - total), shares, times)
            case "long-term", True:
                return PronySeries.from_long_term(modulus / (1.0 + total), shares, times)
            case "long-term", False:
                return PronySeries.from_long_term(modulus, shares, times)
        moduli = self.stress_unit.to_si(shares)
        if instantaneous:
            return PronySeries.from_fractions(modulus, moduli / modulus, times)
        return PronySeries(equilibrium=modulus, moduli=moduli, times=frozen(times))


@contextmanager
def _collected(faults: list[Fault], table: str) -> Iterator[None]:
    """Turn an inadmissible constant into a fault of its table, and go on."""
    try:
        yield
    except ParameterError as error:
        key = f"{table}.{error.name}"
        faults.append(Fault(key=key, found=str(error.found), expected=error.expected, hint=error.hint))
    except ShiftRangeError as error:
        faults.append(Fault(key=table, found=str(error), expected="a law that answers where it is used"))
    except PluginError as error:
        faults.append(
            Fault(key=f"{table}.law", found=str(error), expected="a plug-in that makes a law of the constants")
        )


def read_card(file: str | Path) -> Card:
    """Read a card file.

    Parameters
    ----------
    file : str or Path

    Returns
    -------
    Card
        Whose file is well formed; whether its constants are a material is for `Card.material` to say.

    Raises
    ------
    FileError
        With every fault of the file at once.
    """
    data = read_toml(file)
    require_kind(data, "card", str(file))
    return parse_card(data, str(file))


def parse_card(data: dict[str, Any], file: str) -> Card:
    """Make a card of plain tables.

    Parameters
    ----------
    data : dict
        As read from TOML.
    file : str
        What to call it in messages.

    Returns
    -------
    Card

    Raises
    ------
    FileError
        With every fault at once.
    """
    faults: list[Fault] = []
    document, law_table, limits = None, None, None
    try:
        document = validated(CardDocument, data)
    except FaultyInputError as error:
        faults += error.faults
    shift = data.get("shift")
    if isinstance(shift, dict):
        try:
            constants, limits = split_range(shift)
        except FaultyInputError as error:
            faults += error.faults
            constants = {key: value for key, value in shift.items() if key not in ("measured", "outside")}
        try:
            law_table = parse_shift(constants)
        except FaultyInputError as error:
            faults += error.faults
    if document is not None:
        faults += contradictions(document)
    if faults or document is None or law_table is None or limits is None:
        raise FileError(file, faults)
    return Card(file=file, document=document, law_table=law_table, limits=limits)


def plain(document: CardDocument) -> dict[str, Any]:
    """The document as plain tables, keys that were left out left out."""
    return document.model_dump(exclude_unset=True)
