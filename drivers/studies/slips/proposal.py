"""What a slip proposes, and the changes to a card that proposals are made of."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

from matlib.card import Card
from matlib.shift_tables import PolynomialTable, TableTable

__all__ = ["Proposal", "SlipKind", "strength", "with_elastic", "with_law", "with_prony", "with_strength"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Proposal:
    """A card as it would read without a slip.

    Parameters
    ----------
    card : Card
        The corrected card.
    key : str
        The key to look at.
    found : str
        What stands there.
    fits : str
        What would stand there without the slip.
    because : str
        What went wrong, in words.
    """

    card: Card
    key: str
    found: str
    fits: str
    because: str


@dataclass(frozen=True, slots=True, kw_only=True)
class SlipKind:
    """One kind of mistake.

    Parameters
    ----------
    id : str
        Stable name, for scripts.
    proposals : callable
        Takes the card that may hold the mistake, and the other one; yields corrected cards.
    """

    id: str
    proposals: Callable[[Card, Card], Iterator[Proposal]]


def with_law(card: Card, **changes: Any) -> Card:
    """The card with other constants in its law."""
    return dataclasses.replace(card, law_table=card.law_table.model_copy(update=changes))


def with_prony(card: Card, **changes: Any) -> Card:
    """The card with other keys in ``[prony]``."""
    assert card.document.prony is not None
    prony = card.document.prony.model_copy(update=changes)
    return dataclasses.replace(card, document=card.document.model_copy(update={"prony": prony}))


def with_elastic(card: Card, **changes: Any) -> Card:
    """The card with other keys in ``[elastic]``."""
    elastic = card.document.elastic.model_copy(update=changes)
    return dataclasses.replace(card, document=card.document.model_copy(update={"elastic": elastic}))


def strength(card: Card) -> tuple[str, float] | None:
    """The constant that ln a_T is proportional to, where it is one number: its key and value."""
    table = card.law_table
    for key in ("C1", "B", "activation_energy"):
        value = getattr(table, key, None)
        if value is not None:
            return key, float(value)
    return None


def with_strength(card: Card, factor: float) -> Card | None:
    """The card with ln a_T multiplied by a factor everywhere; None for a law without such a constant."""
    table = card.law_table
    if isinstance(table, PolynomialTable):
        return with_law(card, coefficients=[factor * c for c in table.coefficients])
    if isinstance(table, TableTable):
        return with_law(card, points=[[T, factor * a] for T, a in table.points])
    constant = strength(card)
    return None if constant is None else with_law(card, **{constant[0]: factor * constant[1]})
