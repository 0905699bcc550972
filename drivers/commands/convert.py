"""``cardproof convert``."""

from __future__ import annotations

import os
from collections.abc import Sequence
from typing import TYPE_CHECKING, Literal

from rich.text import Text

from drivers.commands.output import deliver, require_folder
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.report.data import conversion_data
from drivers.report.fit import fit_data, fit_tables
from drivers.report.tables import conversion_tables
from matlib.card import read_card
from matlib.card_conversion import convert_card
from matlib.errors import ParameterError, UnknownNameError
from matlib.files import write_atomically
from matlib.shift.conversion import TARGETS, FitMethod
from matlib.units import STRESS, TEMPERATURE, TIME, Unit, parse_temperature

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run"]

LARGEST_TABLE = 10_000


def run(
    file: str,
    to: str,
    output: str,
    *,
    reference: str | None = None,
    span: tuple[str, str] | None = None,
    points: int | None = None,
    base: str | None = None,
    units: Sequence[str] = (),
    fit: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Convert a card and write the new one."""
    require_folder(output)
    require_folder(json_file)
    card = read_card(file)
    own = card.law_table.model_dump()["law"]
    if to not in TARGETS and to != own:
        raise UnknownNameError("law for --to", to, TARGETS)
    if points is not None and not 2 <= points <= LARGEST_TABLE:
        raise ParameterError("--points", f"a whole number from 2 to {LARGEST_TABLE}", points)
    unit = card.temperature_unit
    converted = convert_card(
        card,
        to,
        T_ref=None if reference is None else parse_temperature(reference, unit),
        T_range=None if span is None else (parse_temperature(span[0], unit), parse_temperature(span[1], unit)),
        points=points,
        base=_parse_base(base),
        units=tuple(_find_any_unit(name) for name in units),
        fit=_parse_fit(fit),
    )
    replaces = os.path.realpath(file) == os.path.realpath(output)
    inputs = inputs_of(report, [(file, "card A")])  # before it may be written over
    write_atomically(output, converted.text())
    tables = [*conversion_tables(converted, output, unit), *fit_tables(converted)]
    if replaces:
        tables.append(Text(f"{output} has taken the place of the card that it was made from."))

    def page(wanted: Report) -> Page:
        from drivers.report.convert_page import convert_page

        return convert_page(converted, card, read_card(output), origin_of(wanted, inputs, [(output, "card B")]))

    data = conversion_data(converted, output) | {"fit": fit_data(converted)}
    return deliver(data, tables, json_file, report, page)


def _parse_base(text: str | None) -> Literal[10, "e"] | None:
    if text is None:
        return None
    if text not in ("10", "e"):
        raise ParameterError("--base", "10 or e", repr(text))
    return 10 if text == "10" else "e"


def _parse_fit(text: str | None) -> FitMethod | None:
    match text:
        case None:
            return None
        case "least-squares" | "minimax":
            return text
    raise UnknownNameError("method for --fit", text, ("least-squares", "minimax"))


def _find_any_unit(name: str) -> Unit:
    known = {**STRESS, **TIME, **TEMPERATURE}
    if name not in known:
        raise UnknownNameError("unit for --units", name, known)
    return known[name]
