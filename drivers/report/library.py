"""Libraries of cards as one table each, the worst first, and as plain data."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

from rich.console import RenderableType
from rich.text import Text

from drivers.report.data import envelope
from drivers.report.tables import give_way, percent, plain_table, verdict_line

__all__ = ["Entry", "library_data", "library_tables", "worst_first"]

Outcome = Literal["holds", "falls short", "missing", "unreadable"]
ORDER: dict[Outcome, int] = {"unreadable": 0, "missing": 1, "falls short": 2, "holds": 3}
MANY: dict[Outcome, str] = {"unreadable": "unreadable", "missing": "missing", "falls short": "fall short"}
LONG_NAME = 18
STYLES: dict[Outcome, str] = {"unreadable": "bold red", "missing": "red", "falls short": "red", "holds": "green"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """One card, or one pair, of a library.

    Parameters
    ----------
    name : str
    outcome : {"holds", "falls short", "missing", "unreadable"}
        "missing" where there is nothing to hold the card against.
    weight : float
        Orders entries of one outcome: more is worse.
    relative : float or None
        Largest difference, where one was measured.
    note : str
        What there is to say in one line.
    content : dict
        More for the JSON form.
    """

    name: str
    outcome: Outcome
    weight: float = 0.0
    relative: float | None = None
    note: str = ""
    content: dict[str, Any] = field(default_factory=dict)


def worst_first(entries: Sequence[Entry]) -> list[Entry]:
    """By outcome, then by weight, then by name."""
    return sorted(entries, key=lambda entry: (ORDER[entry.outcome], -entry.weight, entry.name))


def library_data(command: str, key: str, entries: Sequence[Entry]) -> dict[str, Any]:
    """All entries under a key, the worst first."""
    rows = [
        {"name": entry.name, "outcome": entry.outcome, "relative": entry.relative, "note": entry.note, **entry.content}
        for entry in worst_first(entries)
    ]
    return envelope(command, _holds(entries), **{key: rows})


def _holds(entries: Sequence[Entry]) -> bool:
    return all(entry.outcome == "holds" for entry in entries)


def library_tables(what: str, entries: Sequence[Entry]) -> list[RenderableType]:
    """Verdict and summary; `what` names the entries, as in "cards"."""
    counts = {outcome: sum(entry.outcome == outcome for entry in entries) for outcome in ORDER}
    found = ", ".join(
        f"{count} {MANY[outcome] if count > 1 else outcome}"
        for outcome, count in counts.items()
        if count and outcome != "holds"
    )
    line = f"{counts['holds']} of {len(entries)} {what}" + (f"; {found}" if found else "")
    measured = any(entry.relative is not None for entry in entries)
    columns = [("card", "left"), ("", "left"), *([("difference", "right")] if measured else []), ("what", "left")]
    longest = max((len(entry.name) for entry in entries), default=0)
    table = give_way(plain_table("", columns), {0: min(longest, LONG_NAME), len(columns) - 1: 14})
    for entry in worst_first(entries):
        row = [Text(entry.name), Text(entry.outcome, style=STYLES[entry.outcome])]
        if measured:
            row.append(Text("" if entry.relative is None else percent(entry.relative)))
        table.add_row(*row, Text(entry.note))
    return [verdict_line(_holds(entries), line), table]
