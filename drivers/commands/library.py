"""``check``, ``verify`` and ``compare`` on folders of cards."""

from __future__ import annotations

import sys
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

from drivers.baseline_file import read_baseline
from drivers.commands.inputs import read_all
from drivers.commands.output import deliver, parse_tolerance, require_folder
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.library import baseline_beside, find_cards, is_folder, paired
from drivers.report.data import slip_data
from drivers.report.library import Entry, library_data, library_tables, worst_first
from drivers.report.tables import percent
from matlib.admissibility import check_card, is_admissible
from matlib.card import read_card
from matlib.errors import CardproofError, FileError, FilesError, ParameterError

if TYPE_CHECKING:
    from drivers.report.page import Page, Picture

__all__ = ["check_library", "compare_library", "verify_library"]

MOST_DRAWN = 60
"""Cards of a library that are drawn, the worst first."""


def check_library(names: Sequence[str], *, json_file: str | None = None, report: Report | None = None) -> int:
    """Check every card of folders and files."""
    require_folder(json_file)
    files = [file for name in names for file in (find_cards(name) if is_folder(name) else (name,))]
    title = f"Checked: all cards of {', '.join(names)}"
    told = _Told(command="check", key="cards", what="cards are sane", title=title)
    tasks = {file: partial(_checked, file) for file in files}
    return _run(told, tasks, json_file, report, [(file, "card") for file in files])


def _checked(file: str) -> Entry:
    card = read_card(file)
    findings = check_card(card)
    counts = {severity: sum(f.severity == severity for f in findings) for severity in ("error", "warning", "note")}
    note = ", ".join(f"{n} {name}{'s' if n > 1 else ''}" for name, n in counts.items() if n)
    ids = ", ".join(dict.fromkeys(f.id for f in findings if f.severity != "note"))
    return Entry(
        name=file,
        outcome="holds" if is_admissible(list(findings)) else "falls short",
        weight=1000.0 * counts["error"] + counts["warning"],
        note=f"{note} ({ids})" if ids else note,
        content={
            "name": card.document.name,
            "file": file,
            "findings": [{"id": f.id, "severity": f.severity, "message": f.message} for f in findings],
        },
    )


def _pictures(entries: Sequence[Entry]) -> list[Picture]:
    """The terms of each card against its service; of a large library, of the worst."""
    from drivers.report.check_page import spectrum_picture

    readable = [entry.name for entry in worst_first(entries) if entry.outcome != "unreadable"]
    drawn = (spectrum_picture(read_card(file), file) for file in readable[:MOST_DRAWN])
    return [picture for picture in drawn if picture is not None]


def verify_library(folder: str, *, json_file: str | None = None, report: Report | None = None) -> int:
    """Hold every card of a folder against the baseline beside it; one without is said, and falls short."""
    cards = find_cards(folder)
    beside = [(baseline_beside(file), "baseline") for file in cards]
    title = f"Compared: all cards of {folder}, each with the baseline beside it"
    told = _Told(command="verify", key="cards", what="cards behave as accepted", title=title)
    tasks = {file: partial(_verified, file) for file in cards}
    return _run(told, tasks, json_file, report, [*((file, "card") for file in cards), *beside])


def _verified(file: str) -> Entry:
    from drivers.commands.verify import verify_card
    from drivers.report.baseline import verdict_text, verified_content

    card, beside = read_card(file), baseline_beside(file)
    if not Path(beside).exists():
        note = f"no baseline beside it: record one, {Path(beside).name}"
        content = {"card": {"name": card.document.name, "file": file}, "paths": [], "moved": []}
        return Entry(name=file, outcome="missing", note=note, content=content)
    verified = verify_card(card, read_baseline(beside))
    worst = verified.verification.worst
    matter = [moved.part for moved in verified.moved if moved.matters]
    note = verdict_text(worst) + (f"; moved: {', '.join(matter)}" if matter else "")
    note += f"; likely slip: {verified.slips[0].id}" if verified.slips else ""
    return Entry(
        name=file,
        outcome="holds" if verified.holds else "falls short",
        weight=worst.ratio,
        relative=worst.relative,
        note=note,
        content=verified_content(verified),
    )


def compare_library(
    first: str,
    second: str,
    *,
    paths: Sequence[str] = (),
    tolerance: str = "1%",
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Compare the cards of two folders, paired by file name; one without a partner is said, and falls short."""
    require_folder(json_file)
    for name in (first, second):
        if not is_folder(name):
            raise ParameterError("CARD_A and CARD_B", "two cards or two folders", f"{name!r}, which is no folder")
    fraction = parse_tolerance(tolerance)

    def compared(name: str, one: str | None, other: str | None) -> Entry:
        if one is None or other is None:
            read_all(read_card, [file for file in (one, other) if file is not None])
            lacking = second if other is None else first
            return Entry(name=name, outcome="missing", note=f"no partner in {lacking}", content={"files": [one, other]})
        return _compared(name, one, other, paths, fraction)

    pairs = paired(first, second)
    tasks = {pair.name: partial(compared, pair.name, pair.first, pair.second) for pair in pairs}
    title = f"Compared: the cards of {first} with those of {second}, tolerance {percent(fraction)} of each path's peak"
    told = _Told(command="compare", key="pairs", what="pairs say the same", title=title)
    files = [(file, "card") for pair in pairs for file in (pair.first, pair.second) if file is not None]
    return _run(told, tasks, json_file, report, [*files, *((path, "path") for path in paths)])


def _compared(name: str, one: str, other: str, paths: Sequence[str], tolerance: float) -> Entry:
    from drivers.commands.compare import compare_cards, likely_slips, what_to_compare

    a, b = read_all(read_card, [one, other])
    given, window = what_to_compare(a, b, paths)
    comparison = compare_cards(a, b, given, window, tolerance)
    slips = () if comparison.holds else likely_slips(a, b, given, window, comparison)
    worst = comparison.worst
    no_answer = worst.relative is None
    note = comparison.same if comparison.same == "identical" else f"{comparison.same}, most on path {worst.path.name!r}"
    note += f"; likely slip: {slips[0].id}" if slips else ""
    return Entry(
        name=name,
        outcome="holds" if comparison.holds else "falls short",
        weight=float("inf") if worst.relative is None else worst.relative,
        relative=worst.relative,
        note=f"no answer on path {worst.path.name!r}: {worst.reason}" if no_answer else note,
        content={
            "same": comparison.same,
            "holds": comparison.holds,
            "files": [a.file, b.file],
            "slips": [slip_data(slip) for slip in slips],
        },
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class _Told:
    """What a command on a library is called, on the terminal, in JSON and on its page."""

    command: str
    key: str
    what: str
    title: str


def _run(
    told: _Told,
    tasks: Mapping[str, Callable[[], Entry]],
    json_file: str | None,
    report: Report | None,
    files: Sequence[tuple[str, str]],
) -> int:
    """Do every task; faults of files are all told at the end, on standard error, and give exit status 2."""
    entries: list[Entry] = []
    faults: list[str] = []
    for name, task in tasks.items():
        try:
            entries.append(task())
        except CardproofError as error:
            lines = error.lines() if isinstance(error, FileError | FilesError) else [f"{name}: {error}"]
            faults += [line for line in lines if line not in faults]
            entries.append(Entry(name=name, outcome="unreadable", note=lines[0], content={"faults": lines}))

    def page(wanted: Report) -> Page:
        from drivers.report.library_page import library_page

        inputs = inputs_of(wanted, [(file, what) for file, what in files if Path(file).is_file()])
        drawn = _pictures(entries) if told.command == "check" else []
        return library_page(told.what, told.title, entries, drawn, origin_of(wanted, inputs))

    data, tables = library_data(told.command, told.key, entries), library_tables(told.what, entries)
    status = deliver(data, tables, json_file, report, page)
    for line in faults:
        print(" ".join(line.split()), file=sys.stderr)
    return 2 if faults else status
