"""``cardproof compare`` where a routine stands in the place of a card, or of both."""

from __future__ import annotations

from collections.abc import Sequence
from contextlib import ExitStack
from typing import TYPE_CHECKING

from drivers.battery import battery, card_window
from drivers.commands.failing import with_routine
from drivers.commands.inputs import read_all, read_subject
from drivers.commands.output import deliver, parse_tolerance, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.foreign.foreign import ForeignRoutine
from drivers.path import Path
from drivers.path_file import read_path
from drivers.report.data import comparison_data
from drivers.report.progress import progress
from drivers.report.tables import comparison_tables
from drivers.studies.compare import Comparison
from drivers.studies.compare_routines import CardSide, RoutineSide, Side, compare_routines
from drivers.studies.slips import Slip
from drivers.subject import Subject, card_of
from matlib.card import Card
from matlib.errors import ParameterError

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["page_of", "run"]


def run(
    file_a: str,
    file_b: str,
    *,
    paths: Sequence[str],
    tolerance: str,
    plot: str | None,
    json_file: str | None,
    report: Report | None = None,
) -> int:
    """Compare a routine with a card, or two routines."""
    fraction = parse_tolerance(tolerance)
    a, b = read_all(read_subject, [file_a, file_b])
    given = _paths(a, b, paths)

    def task() -> int:
        with ExitStack() as stack:
            first, second = _side(a, stack), _side(b, stack)
            with progress("comparing", len(given)) as advance:
                comparison = compare_routines(first, second, given, tolerance=fraction, progress=advance)
        if plot is not None:
            from drivers.report.plots import comparison_figure

            save_figure(comparison_figure(comparison, a, b), plot)

        def page(wanted: Report) -> Page:
            return page_of(comparison, a, b, (), paths, wanted)

        tables = comparison_tables(comparison, a, b)
        return deliver(comparison_data(comparison, a, b), tables, json_file, report, page)

    return with_routine("compare", json_file, task)


def page_of(
    comparison: Comparison, a: Subject, b: Subject, slips: Sequence[Slip], paths: Sequence[str], wanted: Report
) -> Page:
    """The page of a comparison, with all files that went into it."""
    from drivers.report.compare_page import compare_page

    files = [(a.file, "A"), (b.file, "B"), *((path, "path") for path in paths)]
    return compare_page(comparison, a, b, slips, origin_of(wanted, inputs_of(wanted, files)))


def _side(subject: Subject, stack: ExitStack) -> Side:
    if isinstance(subject, Card):
        return CardSide(material=subject.material())
    return RoutineSide(routine=stack.enter_context(ForeignRoutine(subject)))


def _paths(a: Subject, b: Subject, files: Sequence[str]) -> tuple[Path, ...]:
    """Those of files; or the battery of the first card that states a service window, or of the first that there is."""
    if files:
        return tuple(read_all(read_path, files))
    cards = [card for card in (card_of(a), card_of(b)) if card is not None]
    if not cards:
        hint = 'or name the card that a routine is meant to be, card = "x.card.toml", in its file'
        raise ParameterError("--path", "given, where neither side is or names a card", "none", hint)
    card = next((card for card in cards if card.document.service), cards[0])
    material = card.material()
    return battery(material, card_window(card, material))
