"""``cardproof drive``."""

from __future__ import annotations

from drivers.commands.inputs import gather
from drivers.commands.output import deliver, require_folder, require_picture, save_figure
from drivers.history import csv_text
from drivers.path import Path
from drivers.path_file import read_path
from drivers.point import drive
from drivers.report.data import drive_data
from drivers.report.progress import progress
from drivers.report.tables import history_tables
from matlib.card import Card, read_card
from matlib.documents import write_atomically
from matlib.errors import ParameterError
from matlib.recursion import find_recursion
from matlib.shift import find_shift_rule
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["run"]

LARGEST_HISTORY = 5_000_000  # rows
LONGEST_NUMBER = 18  # digits


def run(
    card_file: str,
    path_file: str,
    *,
    output: str | None = None,
    shift_rule: str = "integrated",
    recursion: str = "exponential",
    keep: str = "all",
    plot: str | None = None,
    json_file: str | None = None,
) -> int:
    """Drive a card along a path; write its history and a picture where they are asked for."""
    for file in (output, json_file):
        require_folder(file)
    require_picture(plot)
    rule, carried, kept = find_shift_rule(shift_rule), find_recursion(recursion), _parse_keep(keep)
    card, path = gather([lambda: read_card(card_file), lambda: read_path(path_file)])
    assert isinstance(card, Card)
    assert isinstance(path, Path)
    routine = LinearViscoelastic(material=card.material(), recursion=carried, shift_rule=rule)
    if kept == "all" and path.increment_count > LARGEST_HISTORY:
        raise ParameterError("--keep", f"ends or a number, since the path has over {LARGEST_HISTORY} increments", kept)
    with progress(f"driving {path.name}", path.increment_count) as advance:
        history = drive(routine, path, keep=kept, progress=advance)
    if output is not None:
        text = csv_text(history, stress=card.stress_unit, time=card.time_unit, temperature=card.temperature_unit)
        write_atomically(output, text)
    if plot is not None:
        from drivers.report.plots import drive_figure

        save_figure(drive_figure(history, card, path), plot)
    data = drive_data(history, card, path, file=output, shift_rule=shift_rule, recursion=recursion)
    title = f"{card.name} on {path.name} ({path.mode.name}; {shift_rule}, {recursion})"
    tables = history_tables(history.at_segment_ends(), title, card.stress_unit, card.temperature_unit)
    return deliver(data, tables, json_file)


def _parse_keep(text: str) -> str | int:
    if text in ("all", "ends"):
        return text
    if not (text.isascii() and text.isdigit() and len(text) <= LONGEST_NUMBER and int(text) >= 1):
        raise ParameterError("--keep", "all, ends or a whole number >= 1", repr(text))
    return int(text)
