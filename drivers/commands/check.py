"""``cardproof check``."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from drivers.commands.output import deliver, require_folder
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.library import is_folder
from drivers.report.data import checks_data
from drivers.report.tables import findings_table
from matlib.admissibility import check_card
from matlib.card import read_card
from matlib.files import read_all

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run"]


def run(files: Sequence[str], *, json_file: str | None = None, report: Report | None = None) -> int:
    """Check cards and say what was found; the faults of all unreadable files at once."""
    require_folder(json_file)
    if any(is_folder(file) for file in files):
        from drivers.commands.library import check_library

        return check_library(files, json_file=json_file, report=report)
    results = [(card, check_card(card)) for card in read_all(read_card, files)]
    tables = [part for card, findings in results for part in findings_table(card, findings)]

    def page(wanted: Report) -> Page:
        from drivers.report.check_page import check_page

        inputs = inputs_of(wanted, [(file, "card") for file in files])
        return check_page(results, origin_of(wanted, inputs))

    return deliver(checks_data(results), tables, json_file, report, page)
