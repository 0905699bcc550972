"""Libraries of cards: which cards a folder holds, and what belongs to which."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from pathlib import Path

from matlib.errors import Fault, FileError

__all__ = ["BASELINE", "CARD", "Pair", "baseline_beside", "find_cards", "is_folder", "paired"]

CARD = ".card.toml"
BASELINE = ".baseline.json"


@dataclass(frozen=True, slots=True, kw_only=True)
class Pair:
    """Two cards of one file name in two folders; None where a folder lacks it."""

    name: str
    first: str | None
    second: str | None


def is_folder(name: str) -> bool:
    """Whether a command was given a library rather than a file."""
    return Path(name).is_dir()


def find_cards(folder: str | Path) -> tuple[str, ...]:
    """All cards in a folder and below it, by name.

    Parameters
    ----------
    folder : str or Path

    Returns
    -------
    files : tuple of str
        Not empty.

    Raises
    ------
    FileError
        If there are none, or the folder cannot be read.
    """
    if not Path(folder).is_dir():
        found = "a file" if Path(folder).exists() else "nothing"
        raise FileError(str(folder), [Fault(key="folder", found=found, expected="a folder of cards")])
    try:
        files = sorted(str(path) for path in Path(folder).rglob(f"*{CARD}") if not path.is_dir())
    except OSError as error:
        raise FileError(str(folder), [Fault(key="folder", found=str(error), expected="a folder to read")]) from None
    if not files:
        raise FileError(str(folder), [Fault(key="folder", found="no card", expected=f"files named *{CARD}")])
    return tuple(files)


def baseline_beside(card: str | Path) -> str:
    """Name of the baseline that belongs to a card: ``X.baseline.json`` beside ``X.card.toml``.

    Examples
    --------
    >>> baseline_beside("SR-4.card.toml")
    'SR-4.baseline.json'
    """
    path = Path(card)
    return str(path.with_name(path.name.removesuffix(CARD) + BASELINE))


def paired(first: str | Path, second: str | Path) -> tuple[Pair, ...]:
    """Cards of two folders by their place below each, or by their file name where that names one card in each.

    Parameters
    ----------
    first, second : str or Path

    Returns
    -------
    pairs : tuple of Pair
        Those without a partner among them.

    Raises
    ------
    FileError
        If either folder holds no card.
    """
    a = {Path(file).relative_to(first).as_posix(): file for file in find_cards(first)}
    b = {Path(file).relative_to(second).as_posix(): file for file in find_cards(second)}
    pairs = [Pair(name=place, first=a[place], second=b[place]) for place in a if place in b]
    alone_a, alone_b = ({k: v for k, v in own.items() if k not in other} for own, other in ((a, b), (b, a)))
    by_name_a, by_name_b = _by_name(alone_a), _by_name(alone_b)
    for name in by_name_a.keys() & by_name_b.keys():
        one, other = by_name_a[name], by_name_b[name]
        pairs.append(Pair(name=name, first=alone_a.pop(one), second=alone_b.pop(other)))
    pairs += [Pair(name=place, first=file, second=None) for place, file in alone_a.items()]
    pairs += [Pair(name=place, first=None, second=file) for place, file in alone_b.items()]
    return tuple(sorted(pairs, key=lambda pair: pair.name))


def _by_name(places: dict[str, str]) -> dict[str, str]:
    """Places by bare file name, where that is the name of one only."""
    names = {place: place.rpartition("/")[2] for place in places}
    counts = Counter(names.values())
    return {name: place for place, name in names.items() if counts[name] == 1}
