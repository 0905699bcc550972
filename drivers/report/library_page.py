"""The page of a library of cards."""

from __future__ import annotations

from collections.abc import Sequence

from drivers.report.library import Entry, library_tables, worst_first
from drivers.report.page import Fact, Origin, Page, PageTable, Picture
from drivers.report.parts import parts_of

__all__ = ["library_page"]


def library_page(what: str, title: str, entries: Sequence[Entry], pictures: Sequence[Picture], origin: Origin) -> Page:
    """One row a card, the worst first.

    Parameters
    ----------
    what : str
        What is said of the entries that hold, as in "cards are sane".
    title : str
    entries : sequence of Entry
    pictures : sequence of Picture
    origin : Origin
    """
    parts = parts_of(library_tables(what, entries), ["Every one, the worst first"])
    outcomes = ("falls short", "missing", "unreadable")
    counts = {name: sum(entry.outcome == name for entry in entries) for name in outcomes}
    return Page(
        title=title,
        holds=all(entry.outcome == "holds" for entry in entries),
        verdict=parts.verdict,
        lead=parts.lead,
        facts=[
            Fact(label=name.capitalize(), value=str(count), against=f"of {len(entries)}")
            for name, count in counts.items()
        ],
        pictures=pictures,
        tables=[*parts.tables, *_findings(entries)],
        origin=origin,
        tables_first=True,
    )


def _findings(entries: Sequence[Entry]) -> list[PageTable]:
    """What is known of each card besides: findings, faults."""
    rows = []
    for entry in worst_first(entries):
        rows += [
            [entry.name, finding["severity"], finding["id"], finding["message"]]
            for finding in entry.content.get("findings", [])
        ]
        rows += [[entry.name, "error", "unreadable", line] for line in entry.content.get("faults", [])]
    headers = ["card", "severity", "finding", "what, and what to do"]
    return [PageTable(caption="Findings", headers=headers, rows=rows, wide=[3])] if rows else []
