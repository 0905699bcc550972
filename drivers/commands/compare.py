"""``cardproof compare``."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from drivers.battery import Window, battery, card_window, paths_window
from drivers.commands.inputs import gather, read_all
from drivers.commands.output import deliver, parse_tolerance, require_folder, require_picture, save_figure
from drivers.commands.reporting import Report
from drivers.foreign.routine_file import is_routine_file
from drivers.path import Path
from drivers.path_file import read_path
from drivers.report.data import comparison_data
from drivers.report.progress import progress
from drivers.report.tables import comparison_tables
from drivers.studies.compare import Comparison, compare
from drivers.studies.slips import Slip, find_slips
from drivers.studies.slips.evidence import Evidence
from matlib.card import Card, read_card

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["compare_cards", "likely_slips", "run", "what_to_compare"]

USUAL_CANDIDATES = 8000


def run(
    file_a: str,
    file_b: str,
    *,
    paths: Sequence[str] = (),
    tolerance: str = "1%",
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Compare two cards, or routines in their place, and say where they differ most."""
    require_folder(json_file)
    require_picture(plot)
    if is_routine_file(file_a) or is_routine_file(file_b):
        from drivers.commands.compare_routines import run as run_routines

        return run_routines(
            file_a, file_b, paths=paths, tolerance=tolerance, plot=plot, json_file=json_file, report=report
        )
    fraction = parse_tolerance(tolerance)
    a, b = read_all(read_card, [file_a, file_b])
    given, window = what_to_compare(a, b, paths)
    comparison = compare_cards(a, b, given, window, fraction)
    slips = likely_slips(a, b, given, window, comparison)
    if plot is not None:
        from drivers.report.plots import comparison_figure

        save_figure(comparison_figure(comparison, a, b), plot)
    tables = comparison_tables(comparison, a, b, slips)

    def page(wanted: Report) -> Page:
        from drivers.commands.compare_routines import page_of

        return page_of(comparison, a, b, slips, paths, wanted)

    return deliver(comparison_data(comparison, a, b, slips), tables, json_file, report, page)


def what_to_compare(a: Card, b: Card, path_files: Sequence[str]) -> tuple[tuple[Path, ...], Window]:
    """The paths of files and the window that they cover; or the battery of the first card that states a window."""
    first, second = gather([a.material, b.material])
    if path_files:
        paths = tuple(read_all(read_path, path_files))
        return paths, paths_window(paths)
    window = card_window(a, first) if a.document.service or not b.document.service else card_window(b, second)
    return battery(first, window), window


def compare_cards(a: Card, b: Card, paths: Sequence[Path], window: Window, tolerance: float) -> Comparison:
    """Compare two cards on paths; progress is shown."""
    with progress("comparing", len(paths)) as advance:
        return compare(
            a.material(), b.material(), paths, tolerance=tolerance, temperatures=window.temperature, progress=advance
        )


def likely_slips(a: Card, b: Card, paths: Sequence[Path], window: Window, comparison: Comparison) -> tuple[Slip, ...]:
    """Slips that explain why two cards differ; none where they do not."""
    if comparison.same == "identical":
        return ()
    evidence = Evidence(temperature=window.temperature, time=window.time, paths=paths)
    with progress("looking for slips", USUAL_CANDIDATES) as advance:
        return find_slips(a, b, evidence, progress=advance)
