"""Which constants of a part moved, and what each does alone."""

from __future__ import annotations

import math
from collections.abc import Collection
from dataclasses import dataclass, replace

from drivers.card_constants import Constant, constants, in_units_of, with_constants
from drivers.history import History
from drivers.studies.bench import Bench, Change
from drivers.studies.parts import ELASTIC, EXPANSION, FRACTIONS, SHIFT, TERMS, TIMES
from drivers.studies.trading import that_matter, traded
from matlib.card import Card, parse_card
from matlib.card_conversion import convert_card
from matlib.errors import CardproofError

__all__ = ["ConstantChange", "constant_changes"]

Responses = tuple[History | None, ...]

MOST_CONSTANTS = 60
"""Of so many constants that moved in one part each is tried alone; of more, none."""

SAME = 1e-12
"""Relative; a constant that differs by less was only rewritten in another unit."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ConstantChange:
    """A constant that differs between the recorded card and the new one.

    Parameters
    ----------
    key : str
        As in messages, ``shift.C1`` or ``prony.shear[3].fraction``.
    was, now : float, int, str or None
        Both in the unit of the new card; None where a card has no such key.
    unit : str
        That unit.
    effect : float or None
        Change of the behaviour when this alone is put into the recorded card, as a fraction of the peak; None where it cannot be.
    matters : bool
    together : tuple of str
        Keys that undo its effect: moved together with them it has none.
    """

    key: str
    was: float | int | str | None
    now: float | int | str | None
    unit: str
    effect: float | None = None
    matters: bool = False
    together: tuple[str, ...] = ()


def _in_form_of(recorded: Card, now: Card) -> Card:
    """The recorded card with its law in the new card's form, where one is the other exactly: then their constants compare."""
    old, new = (card.law_table.model_dump() for card in (recorded, now))
    if old["law"] == new["law"] and old.get("base") == new.get("base"):
        return recorded
    try:
        converted = convert_card(recorded, new["law"], base=new.get("base"))
    except CardproofError:
        return recorded
    return parse_card(converted.tables, recorded.file) if converted.conversion.exact else recorded


def _part_of(key: str) -> tuple[str, ...]:
    """Parts that a constant belongs to."""
    if key.startswith("shift."):
        return (SHIFT,)
    if key.startswith("expansion."):
        return (EXPANSION,)
    if key.startswith("elastic.") or key == "prony.lateral":
        return (ELASTIC,)
    return (TIMES, TERMS) if key.endswith(".time") else (FRACTIONS, TERMS)


def constant_changes(
    recorded: Card, now: Card, part: str, bench: Bench, before: Responses, matters: bool
) -> tuple[ConstantChange, ...]:
    """Constants of a part that differ, each with its own effect where it can be put into the recorded card alone.

    Parameters
    ----------
    recorded, now : Card
    part : str
        One of `parts.PARTS`.
    bench : Bench
    before : tuple of History or None
        Responses of the recorded card on the bench.
    matters : bool
        Whether the part matters as a whole.
    """
    if part == SHIFT:
        recorded = _in_form_of(recorded, now)
    changes = _changed(recorded, now, part)
    keys = [change.key for change in changes if change.was is not None and change.now is not None]
    if not keys or len(keys) > MOST_CONSTANTS or not _comparable(recorded, now, part):
        return tuple(replace(change, matters=matters) for change in changes)
    values = {key: in_units_of(recorded, constants(now)[key], now) for key in keys}

    def put_in(group: Collection[str]) -> Change:
        try:
            material = with_constants(recorded, {key: values[key] for key in group}).material()
        except CardproofError:
            return Change(ratio=math.inf, relative=None, path="")
        return bench.change(before, bench.run(material))

    alone = {key: put_in((key,)) for key in keys}
    ratios = {key: change.ratio for key, change in alone.items()}
    together = traded(ratios, lambda group: put_in(group).ratio)
    matter = that_matter(ratios, together, matters) if matters else set()
    return tuple(
        replace(
            change,
            effect=alone[change.key].relative if change.key in alone else None,
            matters=change.key in matter if change.key in alone else matters,
            together=together.get(change.key, ()),
        )
        for change in changes
    )


def _changed(recorded: Card, now: Card, part: str) -> list[ConstantChange]:
    old, new = constants(recorded), constants(now)
    changes = []
    for key in dict.fromkeys((*old, *new)):
        if part not in _part_of(key):
            continue
        was = in_units_of(now, old[key], recorded) if key in old else None
        is_now = new[key].value if key in new else None
        if not _same(was, is_now):
            changes.append(ConstantChange(key=key, was=was, now=is_now, unit=_unit(new.get(key) or old[key], now)))
    return changes


def _unit(constant: Constant, card: Card) -> str:
    return constant.unit_name(card)


def _same(a: float | int | str | None, b: float | int | str | None) -> bool:
    if isinstance(a, str | None) or isinstance(b, str | None):
        return a == b
    return abs(a - b) <= SAME * max(abs(a), abs(b))


def _comparable(recorded: Card, now: Card, part: str) -> bool:
    """Whether a number of one card means in the other what it means in its own."""
    old, new = constants(recorded), constants(now)
    texts = [key for key, constant in old.items() if part in _part_of(key) and isinstance(constant.value, str)]
    texts += [key for key, constant in new.items() if part in _part_of(key) and isinstance(constant.value, str)]
    names = {key: constant.value for key, constant in old.items()}
    return all(key in new and names.get(key) == new[key].value for key in texts)
