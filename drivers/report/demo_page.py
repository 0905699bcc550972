"""The page of the demonstration."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from drivers.report.check_page import card_pictures, findings_tables
from drivers.report.compare_page import comparison_pictures
from drivers.report.page import Fact, Origin, Page
from drivers.report.parts import parts_of
from drivers.report.tables import comparison_tables, percent, slip_tables
from drivers.studies.compare import Comparison
from drivers.studies.slips import Slip
from matlib.admissibility import Finding
from matlib.card import Card

__all__ = ["DemoCase", "demo_page"]

PICTURES = 5
"""Of each case: laws, their difference, moduli, the worst path and its difference."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DemoCase:
    """A card that is held against the laboratory's: how it was made, what is expected, and what was found."""

    card: Card
    made: str
    expected: str
    comparison: Comparison
    slips: tuple[Slip, ...]

    @property
    def name(self) -> str:
        """Its file, without the folder."""
        return Path(self.card.file).name


def demo_page(laboratory: Card, cases: Sequence[DemoCase], findings: Sequence[Finding], origin: Origin) -> Page:
    """The laboratory's card, the cards made from it, and which of them say the same."""
    right = all(case.comparison.same == case.expected for case in cases)
    same = sum(case.comparison.same != "different" for case in cases)
    pictures = card_pictures(laboratory, named=True)
    tables = findings_tables([(laboratory, findings)])
    for case in cases:
        if case.comparison.same == "different":
            drawn = comparison_pictures(case.comparison, laboratory, case.card)[:PICTURES]
            pictures += [picture.renamed(f"{case.name}: {picture.title}") for picture in drawn]
        caption = f"{case.name}: every path"
        tables += parts_of(comparison_tables(case.comparison, laboratory, case.card), [caption]).tables
    slips = [line for case in cases for line in parts_of(slip_tables(case.slips[:1])).whole]
    return Page(
        title=f"Demonstration on invented data: {laboratory.name}, and {len(cases)} cards made from it",
        holds=right,
        verdict=f"{same} of {len(cases)} cards made from {laboratory.name} say the same as it, "
        f"{'all as expected' if right else 'not as expected'}",
        lead=[*(f"{case.name}: {case.made}." for case in cases), *slips],
        facts=[_fact(case) for case in cases],
        pictures=pictures,
        tables=tables,
        origin=origin,
    )


def _fact(case: DemoCase) -> Fact:
    worst = case.comparison.worst
    against = ""
    if worst.relative is not None and case.comparison.same != "identical":
        against = f"{percent(worst.relative)} of a peak on {worst.path.name}"
    return Fact(label=case.name, value=case.comparison.same, against=against)
