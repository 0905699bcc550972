"""``cardproof demo``: the whole job on a made-up case."""

from __future__ import annotations

import shlex
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING

from rich.console import RenderableType
from rich.padding import Padding
from rich.text import Text

from drivers.baseline_file import Baseline, write_baseline
from drivers.battery import battery, card_window
from drivers.commands.compare import compare_cards, likely_slips, what_to_compare
from drivers.commands.output import deliver, require_folder, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.history import csv_text
from drivers.path_file import read_path
from drivers.point import drive
from drivers.report.data import checks_data, comparison_data, envelope, json_text
from drivers.report.tables import CAUTION, findings_table, percent, plain_table, slip_tables
from drivers.studies.baseline import record_paths
from drivers.studies.compare import Comparison
from drivers.studies.slips import Slip
from matlib.admissibility import check_card
from matlib.card import Card, read_card
from matlib.card_conversion import convert_card
from matlib.errors import Fault, FileError
from matlib.files import write_atomically
from matlib.units import STRESS, TEMPERATURE
from matlib.viscoelastic import LinearViscoelastic

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run"]

SHIPPED = (
    *("laboratory.card.toml", "slip.card.toml", "thermal-cycles.path.toml", "library.sweep.toml"),
    *("routine.c", "routine.f90", "routine.py", "c.routine.toml", "f90.routine.toml", "python.routine.toml"),
)
TOLERANCE = 0.01


@dataclass(frozen=True, slots=True, kw_only=True)
class _Case:
    """A card that is held against the laboratory's, and what is known of it."""

    file: str
    made: str
    expected: str


CASES = (
    _Case(file="converted.card.toml", made="cardproof convert --to vft, a right conversion", expected="identical"),
    _Case(file="slip.card.toml", made="converted by hand, with a slip", expected="different"),
    _Case(
        file="arrhenius.card.toml",
        made="cardproof convert --to arrhenius, the best plain Arrhenius fit",
        expected="different",
    ),
)


def run(folder: Path, *, json_file: str | None = None, report: Report | None = None) -> int:
    """Write the demo's files to a folder, run check, convert, drive and compare on them, and show the verdicts."""
    require_folder(json_file)
    _make_folder(folder)
    for name in SHIPPED:
        content = resources.files("drivers.demo").joinpath(name).read_text(encoding="utf-8")
        write_atomically(folder / name, content)
    laboratory = read_card(folder / "laboratory.card.toml")
    findings = check_card(laboratory)
    write_atomically(folder / "check.json", json_text(checks_data([(laboratory, findings)])))
    _convert(laboratory, folder)
    _drive(laboratory, folder)
    _record(laboratory, folder)
    results = [(case, *_compare(laboratory, folder, case)) for case in CASES]
    comparisons = [(case, comparison) for case, comparison, _ in results]
    slips = [slip for _, _, found in results for slip in found[:1]]
    tables: list[RenderableType] = [
        Text("1. Is the laboratory's card sane?  cardproof check", style="bold"),
        *findings_table(laboratory, findings),
        Text("\n2. Do the cards made from it say the same?  cardproof convert, cardproof compare", style="bold"),
        *(_indented(f"{case.file}: {case.made}") for case in CASES),
        _indented(
            "Held against laboratory.card.toml in relaxation, creep, pulls, thermal jump, thermal cycle and cooling:\n"
        ),
        _verdicts(comparisons, laboratory),
        Text("\n3. Which mistake explains the difference?", style="bold"),
        *slip_tables(slips),
        Text(f"\nCards, path, baseline, history, pictures and results in JSON are in {folder}. The case is invented."),
        Text(CAUTION, style="italic"),
    ]
    as_expected = all(comparison.same == case.expected for case, comparison in comparisons)
    cases = [
        {"file": case.file, "same": comparison.same, "relative": comparison.worst.relative}
        for case, comparison in comparisons
    ]
    wanted = report or Report(file=str(folder / "report.html"), command=shlex.join(["cardproof", "demo", str(folder)]))

    def page(wanted: Report) -> Page:
        from drivers.report.demo_page import DemoCase, demo_page

        made = [
            DemoCase(card=card, made=case.made, expected=case.expected, comparison=comparison, slips=found)
            for case, comparison, found in results
            for card in [read_card(folder / case.file)]
        ]
        inputs = inputs_of(wanted, [(str(folder / name), "of the demonstration") for name in SHIPPED])
        outputs = [(str(folder / name), "card") for name in ("converted.card.toml", "arrhenius.card.toml")]
        return demo_page(laboratory, made, findings, origin_of(wanted, inputs, outputs))

    return deliver(envelope("demo", as_expected, folder=str(folder), cases=cases), tables, json_file, wanted, page)


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        found = error.strerror or str(error)
        raise FileError(str(folder), [Fault(key="folder", found=found, expected="a folder that can be made")]) from None


def _convert(laboratory: Card, folder: Path) -> None:
    """The right conversion, as a simulation group may want it: offset Arrhenius at 25 degC, in Pa and K; and a poor one."""
    units = (STRESS["Pa"], TEMPERATURE["K"])
    right = convert_card(laboratory, "vft", T_ref=298.15, units=units)
    write_atomically(folder / "converted.card.toml", right.text())
    write_atomically(folder / "arrhenius.card.toml", convert_card(laboratory, "arrhenius").text())


def _drive(laboratory: Card, folder: Path) -> None:
    from drivers.report.plots import drive_figure

    path = read_path(folder / "thermal-cycles.path.toml")
    history = drive(LinearViscoelastic(material=laboratory.material()), path)
    text = csv_text(history, stress=laboratory.stress_unit, temperature=laboratory.temperature_unit)
    write_atomically(folder / "history.csv", text)
    save_figure(drive_figure(history, laboratory, path), str(folder / "thermal-cycles.png"))


def _record(laboratory: Card, folder: Path) -> None:
    """The laboratory's behaviour, as accepted."""
    material = laboratory.material()
    paths = battery(material, card_window(laboratory, material))
    recorded = record_paths(material, paths, [TOLERANCE] * len(paths))
    write_baseline(folder / "laboratory.baseline.json", Baseline.of(laboratory, recorded))


def _compare(laboratory: Card, folder: Path, case: _Case) -> tuple[Comparison, tuple[Slip, ...]]:
    from drivers.report.plots import comparison_figure

    other = read_card(folder / case.file)
    paths, window = what_to_compare(laboratory, other, [])
    comparison = compare_cards(laboratory, other, paths, window, TOLERANCE)
    slips = likely_slips(laboratory, other, paths, window, comparison)
    stem = case.file.partition(".")[0]
    write_atomically(folder / f"compare-{stem}.json", json_text(comparison_data(comparison, laboratory, other, slips)))
    save_figure(comparison_figure(comparison, laboratory, other), str(folder / f"compare-{stem}.png"))
    return comparison, slips


def _indented(text: str) -> Padding:
    """A step's detail, whose further lines stand under the first."""
    return Padding(Text(text), (0, 0, 0, 3))


def _verdicts(comparisons: list[tuple[_Case, Comparison]], laboratory: Card) -> RenderableType:
    columns = [("card", "left"), ("largest stress error", "right"), ("on path", "left"), ("says the same?", "left")]
    table = plain_table("", columns)
    for case, comparison in comparisons:
        result = max(
            (p for p in comparison.paths if p.difference is None or p.difference.quantity == "stress"),
            key=lambda p: p.relative or 0.0,
        )
        style = "bold green" if comparison.holds else "bold red"
        error = "no answer" if result.relative is None else percent(result.relative)
        on = "(rounding)" if result.identical else result.path.name
        table.add_row(case.file, error, on, Text(comparison.same, style=style))
    return table
