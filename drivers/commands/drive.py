"""``cardproof drive``."""

from __future__ import annotations

from drivers.commands.inputs import gather
from drivers.commands.output import deliver, require_folder, require_picture, save_figure
from drivers.history import csv_text
from drivers.path import Path
from drivers.path_file import read_path
from drivers.point import drive
from drivers.reference import Reference, solve
from drivers.report.data import drive_data
from drivers.report.progress import progress
from drivers.report.tables import history_tables, percent
from drivers.studies.trial import Rule
from matlib.card import Card, read_card
from matlib.documents import write_atomically
from matlib.errors import ParameterError
from matlib.recursion import find_recursion
from matlib.shift import find_shift_rule

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
) -> int:
    """Drive a card along a path; write its history and a picture where they are asked for."""
    for file in (output, json_file):
        require_folder(file)
    require_picture(plot)
    kept = _parse_keep(keep)
    if exact and (shift_rule or recursion):
        hint = "the reference solution uses neither"
        raise ParameterError("--exact", "given without --shift-rule and --recursion", shift_rule or recursion, hint)
    rule = Rule(shift_rule=shift_rule or "integrated", recursion=recursion or "exponential")
    find_shift_rule(rule.shift_rule)
    find_recursion(rule.recursion)
    card, path = gather([lambda: read_card(card_file), lambda: read_path(path_file)])
    assert isinstance(card, Card)
    assert isinstance(path, Path)
    material = card.material()
    most = LARGEST_EXACT if exact else LARGEST_HISTORY
    if path.increment_count > most and (exact or kept == "all"):
        expected = "fewer increments in the path" if exact else "ends or a number"
        raise ParameterError("--exact" if exact else "--keep", f"{expected}, since it has over {most}", kept)
    if exact:
        reference = solve(material, path)
        history, how = reference.history.kept(kept), _exactness(reference)
    else:
        with progress(f"driving {path.name}", path.increment_count) as advance:
            history, how = drive(rule.routine(material), path, keep=kept, progress=advance), str(rule)
    if output is not None:
        text = csv_text(history, stress=card.stress_unit, time=card.time_unit, temperature=card.temperature_unit)
        write_atomically(output, text)
    if plot is not None:
        from drivers.report.plots import drive_figure

        save_figure(drive_figure(history, card, path), plot)
    data = drive_data(history, card, path, file=output, how=reference if exact else rule)
    title = f"{card.name} on {path.name} ({path.mode.name}; {how})"
    tables = history_tables(history.at_segment_ends(), title, card.stress_unit, card.temperature_unit)
    return deliver(data, tables, json_file)


def _exactness(reference: Reference) -> str:
    kind = "estimated" if reference.estimated else "guaranteed"
    return f"reference solution, {kind} to {percent(reference.relative_bound)} of the peak"


def _parse_keep(text: str) -> str | int:
    if text in ("all", "ends"):
        return text
    if not (text.isascii() and text.isdigit() and len(text) <= LONGEST_NUMBER and int(text) >= 1):
        raise ParameterError("--keep", "all, ends or a whole number >= 1", repr(text))
    return int(text)
