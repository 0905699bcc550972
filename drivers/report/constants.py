"""The constants of cards side by side, for a reader who has the page and not the files."""

from __future__ import annotations

from collections.abc import Mapping

from drivers.card_constants import constants
from drivers.report.page import PageTable
from matlib.card import Card

__all__ = ["constants_table"]


def constants_table(cards: Mapping[str, Card], caption: str = "Constants", *, terms: bool = True) -> PageTable:
    """Every constant of each card, in the card's own units.

    Parameters
    ----------
    cards : dict of str to Card
        By the name that heads their column; one or two.
    caption : str
    terms : bool
        Whether the terms of the Prony series are among them.
    """
    found = {name: constants(card) for name, card in cards.items()}
    keys = list(dict.fromkeys(key for each in found.values() for key in each))
    tables = list(dict.fromkeys(key.partition(".")[0] for key in keys))
    keys.sort(
        key=lambda key: tables.index(key.partition(".")[0])
    )  # what only the second card has stands with its table
    if not terms:
        keys = [key for key in keys if not key.startswith("prony.")]
    rows = []
    for key in keys:
        row = [key]
        for name, card in cards.items():
            constant = found[name].get(key)
            row += ["", ""] if constant is None else [_number(constant.value), constant.unit_name(card)]
        rows.append(row)
    headers = ["constant", *(text for name in cards for text in (name, "unit"))]
    return PageTable(caption=caption, headers=headers, rows=rows, numeric=range(1, len(headers), 2))


def _number(value: float | int | str) -> str:
    return f"{value:.10g}" if isinstance(value, float) else str(value)
