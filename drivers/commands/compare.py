"""``cardproof compare``."""

from __future__ import annotations

from collections.abc import Sequence

from drivers.battery import battery, card_window
from drivers.commands.inputs import gather, read_all
from drivers.commands.output import deliver, parse_tolerance, require_folder, require_picture, save_figure
from drivers.path_file import read_path
from drivers.report.data import comparison_data
from drivers.report.progress import progress
from drivers.report.tables import comparison_tables
from drivers.studies.compare import Comparison, compare
from matlib.card import Card, read_card

__all__ = ["compare_cards", "run"]


def run(
    file_a: str,
    file_b: str,
    *,
    paths: Sequence[str] = (),
    tolerance: str = "1%",
    plot: str | None = None,
    json_file: str | None = None,
) -> int:
    """Compare two cards and say where they differ most."""
    require_folder(json_file)
    require_picture(plot)
    fraction = parse_tolerance(tolerance)
    a, b = read_all(read_card, [file_a, file_b])
    comparison = compare_cards(a, b, paths, fraction)
    if plot is not None:
        from drivers.report.plots import comparison_figure

        save_figure(comparison_figure(comparison, a, b), plot)
    return deliver(comparison_data(comparison, a, b), comparison_tables(comparison, a, b), json_file)


def compare_cards(a: Card, b: Card, path_files: Sequence[str], tolerance: float) -> Comparison:
    """Compare two cards on the paths of files, or on the battery of the first card that states a window."""
    first, second = gather([a.material, b.material])
    if path_files:
        paths = tuple(read_all(read_path, path_files))
        ranges = [path.temperature_range for path in paths]
        temperatures = (min(low for low, _ in ranges), max(high for _, high in ranges))
    else:
        window = card_window(a, first) if a.document.service or not b.document.service else card_window(b, second)
        paths, temperatures = battery(first, window), window.temperature
    with progress("comparing", len(paths)) as advance:
        return compare(first, second, paths, tolerance=tolerance, temperatures=temperatures, progress=advance)
