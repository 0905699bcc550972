"""What a command may be asked about: a card, or a routine that is not ours."""

from __future__ import annotations

from drivers.foreign.routine_file import RoutineFile, is_routine_file, read_routine_file
from matlib.card import Card, read_card

__all__ = ["Subject", "card_of", "read_subject", "short_name"]

Subject = Card | RoutineFile
"""Both have a `file`, a `name` and the units to show results in."""


def read_subject(file: str) -> Subject:
    """Read a card, or a routine where the file is named ``*.routine.toml``; `FileError` with every fault."""
    return read_routine_file(file) if is_routine_file(file) else read_card(file)


def card_of(subject: Subject) -> Card | None:
    """The card itself, or the one that a routine is meant to be, where its file names one."""
    return subject if isinstance(subject, Card) else subject.card


def short_name(subject: Subject) -> str:
    """Name without a revision."""
    return subject.document.name if isinstance(subject, Card) else subject.name
