"""Read the spread of a calibration: standard deviations of a card's constants, and their correlations."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated

import numpy as np
from pydantic import Field

from drivers.card_constants import constants
from matlib.arrays import FloatArray, frozen
from matlib.card import Card
from matlib.documents import Document, validated
from matlib.errors import Fault, FaultyInputError, nearest_hint
from matlib.files import read_toml

__all__ = ["Spread", "read_spread"]

ROUNDING = 1e-10
"""How far below zero an eigenvalue of a correlation matrix may lie and be zero to rounding."""

Deviation = Annotated[float, Field(ge=0.0, le=1e60)]


class CorrelationTable(Document):
    """``[[correlation]]``."""

    between: Annotated[list[str], Field(min_length=2, max_length=2)] = Field(
        description="a list of two keys of [spread]"
    )
    value: Annotated[float, Field(ge=-1.0, le=1.0)] = Field(description="a correlation from -1 to 1")


class SpreadDocument(Document):
    """A spread file."""

    name: Annotated[str, Field(max_length=200)] = ""
    note: Annotated[str, Field(max_length=20_000)] = ""
    spread: Annotated[dict[str, Deviation], Field(min_length=1, max_length=1000)] = Field(
        description='a table [spread] with lines such as "shift.C1" = 0.3'
    )
    correlation: list[CorrelationTable] = Field(default_factory=list)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Spread:
    """How much the constants of a card scatter from calibration to calibration: normally distributed about the card's.

    Parameters
    ----------
    keys : tuple of str, length n
    means : ndarray, shape (n,)
        The card's own values, in its units.
    covariance : ndarray, shape (n, n)
        In the card's units, positive semidefinite.
    """

    keys: tuple[str, ...]
    means: FloatArray
    covariance: FloatArray


def read_spread(file: str | Path, card: Card) -> Spread:
    """Read a spread file that belongs to a card.

    Parameters
    ----------
    file : str or Path
    card : Card
        Whose constants scatter, in whose units the standard deviations are.

    Returns
    -------
    Spread

    Raises
    ------
    FileError
        With every fault at once: keys that the card does not have, correlations that no set of numbers can have.
    """
    try:
        document = validated(SpreadDocument, read_toml(file))
        return _spread(document, card)
    except FaultyInputError as error:
        raise error.in_file(str(file)) from None


def _spread(document: SpreadDocument, card: Card) -> Spread:
    known = {key: c.value for key, c in constants(card).items() if not isinstance(c.value, str)}
    keys = tuple(document.spread)
    faults = [
        Fault(
            key=f"spread.{key!r}", found=repr(key), expected="a constant of the recorded card", hint=_hint(key, known)
        )
        for key in keys
        if key not in known
    ]
    correlation = np.eye(len(keys))
    for number, table in enumerate(document.correlation, start=1):
        name = f"correlation[{number}].between"
        strangers = [key for key in table.between if key not in keys]
        faults += [Fault(key=name, found=repr(key), expected="a key of [spread]") for key in strangers]
        if table.between[0] == table.between[1]:
            faults.append(Fault(key=name, found="one key twice", expected="two keys"))
        elif not strangers:
            i, j = (keys.index(key) for key in table.between)
            correlation[i, j] = correlation[j, i] = table.value
    if not faults and np.linalg.eigvalsh(correlation).min() < -ROUNDING:
        found = "correlations that contradict each other"
        faults.append(Fault(key="correlation", found=found, expected="a positive semidefinite matrix of correlations"))
    if faults:
        raise FaultyInputError(faults)
    deviations = np.array([document.spread[key] for key in keys])
    means = frozen([float(known[key]) for key in keys])
    return Spread(keys=keys, means=means, covariance=frozen(correlation * np.outer(deviations, deviations)))


def _hint(key: str, known: dict[str, float | int]) -> str:
    of_term, _, last = key.rpartition(".")
    if last in ("modulus", "moduli") and f"{of_term}.fraction" in known:
        return f"write '{of_term}.fraction', which is the modulus of an absolute series"
    return nearest_hint(key, known) or "keys are such as 'shift.C1', 'elastic.E', 'prony.shear[1].fraction'"
