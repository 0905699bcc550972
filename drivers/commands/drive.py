"""``cardproof drive``."""

from __future__ import annotations

from typing import TYPE_CHECKING

from drivers.commands.failing import with_routine
from drivers.commands.inputs import gather, read_subject
from drivers.commands.output import deliver, require_folder, require_picture, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.foreign.foreign import ForeignRoutine
from drivers.foreign.routine_file import RoutineFile
from drivers.history import History, csv_text
from drivers.path import Path
from drivers.path_file import read_path
from drivers.point import drive
from drivers.reference import Reference, solve
from drivers.report.data import drive_data
from drivers.report.progress import progress
from drivers.report.tables import history_tables, percent
from drivers.studies.trial import OWN, Rule
from drivers.subject import Subject
from matlib.card import Card
from matlib.errors import ParameterError
from matlib.files import write_atomically
from matlib.recursion import find_recursion
from matlib.routine import Routine
from matlib.shift import find_shift_rule

if TYPE_CHECKING:
    from drivers.report.page import File, Page

__all__ = ["run"]

LARGEST_HISTORY = 5_000_000  # rows
LARGEST_EXACT = 200_000
LONGEST_NUMBER = 18  # digits


def run(
    card_file: str,
    path_file: str,
    *,
    output: str | None = None,
    shift_rule: str | None = None,
    recursion: str | None = None,
    exact: bool = False,
    keep: str = "all",
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Drive a card, or a routine, along a path; write its history and a picture where they are asked for."""
    for file in (output, json_file):
        require_folder(file)
    require_picture(plot)
    kept = _parse_keep(keep)
    if exact and (shift_rule or recursion):
        hint = "the reference solution uses neither"
        raise ParameterError("--exact", "given without --shift-rule and --recursion", shift_rule or recursion, hint)
    rule = Rule.of_names(shift_rule, recursion)
    find_shift_rule(rule.shift_rule)
    find_recursion(rule.recursion)
    subject, path = gather([lambda: read_subject(card_file), lambda: read_path(path_file)])
    assert isinstance(path, Path)
    inputs = inputs_of(report, [(card_file, "card or routine"), (path_file, "path")])

    def hand_over(history: History, how: Rule | Reference) -> int:
        assert isinstance(path, Path)
        assert isinstance(subject, Card | RoutineFile)
        return _hand_over(
            history, subject, path, how, output=output, plot=plot, json_file=json_file, report=report, inputs=inputs
        )

    most = LARGEST_EXACT if exact else LARGEST_HISTORY
    if path.increment_count > most and (exact or kept == "all"):
        expected = "fewer increments in the path" if exact else "ends or a number"
        raise ParameterError("--exact" if exact else "--keep", f"{expected}, since it has over {most}", kept)
    if isinstance(subject, RoutineFile):
        for option, given in (("--exact", exact), ("--shift-rule", shift_rule), ("--recursion", recursion)):
            if given:
                raise ParameterError(option, "given with a card only: a routine has a rule of its own", given)

        def task() -> int:
            with ForeignRoutine(subject) as routine:
                history = _driven(routine, path, kept)
            return hand_over(history, OWN)

        return with_routine("drive", json_file, task)
    assert isinstance(subject, Card)
    material = subject.material()
    if exact:
        reference = solve(material, path)
        history = reference.history.kept(kept)
    else:
        history = _driven(rule.routine(material), path, kept)
    how = reference if exact else rule
    return hand_over(history, how)


def _driven(routine: Routine, path: Path, kept: str | int) -> History:
    with progress(f"driving {path.name}", path.increment_count) as advance:
        return drive(routine, path, keep=kept, progress=advance)


def _hand_over(
    history: History,
    subject: Subject,
    path: Path,
    how: Rule | Reference,
    *,
    output: str | None,
    plot: str | None,
    json_file: str | None,
    report: Report | None,
    inputs: tuple[File, ...],
) -> int:
    stress, temperature = subject.stress_unit, subject.temperature_unit
    if output is not None:
        write_atomically(output, csv_text(history, stress=stress, time=subject.time_unit, temperature=temperature))
    if plot is not None:
        from drivers.report.plots import drive_figure

        save_figure(drive_figure(history, subject, path), plot)
    data = drive_data(history, subject, path, file=output, how=how)
    method = str(how) if isinstance(how, Rule) else _exactness(how)
    title = f"{subject.name} on {path.name} ({path.mode.name}; {method})"

    def page(wanted: Report) -> Page:
        from drivers.report.drive_page import drive_page

        return drive_page(history, subject, path, method, origin_of(wanted, inputs, [(output, "history")]))

    tables = history_tables(history.at_segment_ends(), title, stress, temperature)
    return deliver(data, tables, json_file, report, page)


def _exactness(reference: Reference) -> str:
    kind = "estimated" if reference.estimated else "guaranteed"
    return f"reference solution, {kind} to {percent(reference.relative_bound)} of the peak"


def _parse_keep(text: str) -> str | int:
    if text in ("all", "ends"):
        return text
    if not (text.isascii() and text.isdigit() and len(text) <= LONGEST_NUMBER and int(text) >= 1):
        raise ParameterError("--keep", "all, ends or a whole number >= 1", repr(text))
    return int(text)
