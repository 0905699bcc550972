"""``cardproof record``."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from drivers.baseline_file import Baseline, write_baseline
from drivers.battery import battery, card_window
from drivers.commands.inputs import gather, read_all
from drivers.commands.output import deliver, parse_tolerance, require_folder
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.library import baseline_beside
from drivers.path_file import read_path
from drivers.report.baseline import recorded_data, recorded_tables
from drivers.report.progress import progress
from drivers.studies.baseline import record_paths
from matlib.card import read_card
from matlib.errors import FaultyInputError, ParameterError

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["DEFAULT_TOLERANCE", "run"]

DEFAULT_TOLERANCE = "1%"


def run(
    card_file: str,
    *,
    paths: Sequence[str] = (),
    tolerances: Sequence[str] = (),
    output: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Record the behaviour of a card; nothing is written unless all of it is known."""
    file = output or baseline_beside(card_file)
    require_folder(file)
    require_folder(json_file)
    fractions = [parse_tolerance(text) for text in tolerances or [DEFAULT_TOLERANCE]]
    if len(fractions) not in (1, len(paths)):
        raise ParameterError("--tolerance", "given once, or once for each --path", f"{len(fractions)} times")
    card = read_all(read_card, [card_file])[0]
    material = gather([card.material])[0]
    chosen = read_all(read_path, paths) if paths else list(battery(material, card_window(card, material)))
    if len(fractions) == 1:
        fractions *= len(chosen)
    try:
        with progress("recording", len(chosen)) as advance:
            recorded = record_paths(material, chosen, fractions, progress=advance)
    except FaultyInputError as error:
        raise error.in_file(card.file) from None
    baseline = Baseline.of(card, recorded)
    write_baseline(file, baseline)

    def page(wanted: Report) -> Page:
        from drivers.report.baseline_page import recorded_page

        inputs = inputs_of(wanted, [(card_file, "card"), *((path, "path") for path in paths)])
        return recorded_page(baseline, card, file, origin_of(wanted, inputs, [(file, "baseline")]))

    return deliver(recorded_data(baseline, card, file), recorded_tables(baseline, card, file), json_file, report, page)
