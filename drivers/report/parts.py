"""What the terminal shows, as sentences and tables of a page: the same figures in both."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from drivers.report.page import PageTable

__all__ = ["Parts", "page_table", "parts_of"]

SENTENCES = 28
"""A column with a cell of more letters than this holds sentences."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Parts:
    """A result as a page shows it.

    Parameters
    ----------
    verdict : str
        Without the word that it starts with.
    lead : tuple of str
        The sentences after it.
    tables : tuple of PageTable
    whole : tuple of str
        All sentences as they are shown.
    """

    verdict: str
    lead: tuple[str, ...]
    tables: tuple[PageTable, ...]
    whole: tuple[str, ...]


def parts_of(parts: Iterable[RenderableType], captions: Sequence[str] = ()) -> Parts:
    """Sort what is shown into verdict, sentences and tables.

    Parameters
    ----------
    parts : iterable of renderable
        The verdict first, if there is one.
    captions : sequence of str
        For the tables without a title, in their order.

    Returns
    -------
    Parts
    """
    sentences: list[str] = []
    tables: list[PageTable] = []
    left = iter(captions)
    for part in parts:
        if isinstance(part, Table):
            title = str(part.title or "").strip() or next(left)
            tables.append(page_table(part, title))
        else:
            text = part.plain if isinstance(part, Text) else str(part)
            sentences += [line.strip() for line in text.splitlines() if line.strip()]
    first = sentences[0] if sentences else ""
    return Parts(
        verdict=first.partition(": ")[2] or first,
        lead=tuple(sentences[1:]),
        tables=tuple(tables),
        whole=tuple(sentences),
    )


def page_table(table: Table, caption: str) -> PageTable:
    """A table of the terminal as a table of a page; a column without a heading holds verdicts."""
    columns = [
        [cell.plain if isinstance(cell, Text) else str(cell) for cell in column.cells] for column in table.columns
    ]
    return PageTable(
        caption=caption,
        headers=[str(column.header) or "verdict" for column in table.columns],
        rows=[list(row) for row in zip(*columns, strict=True)],
        numeric=[k for k, column in enumerate(table.columns) if column.justify == "right"],
        wide=[k for k, cells in enumerate(columns) if max(map(len, cells), default=0) > SENTENCES],
    )
