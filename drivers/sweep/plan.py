"""All cases of a sweep, each with a key that stands for everything that goes into it."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path as FilePath

import numpy as np

from drivers.battery import battery, card_window
from drivers.card_constants import constants, with_constants
from drivers.path import Path
from drivers.path_file import read_path
from drivers.studies.trial import Rule
from drivers.sweep.sweep_file import SweepFile
from matlib.card import Card, read_card
from matlib.documents import gather
from matlib.errors import CardproofError, Fault, FileError
from matlib.material import Material
from matlib.version import __version__

__all__ = ["Case", "Plan", "plan_of"]

REDRAWS = 50
"""Draws of a sample at most until its constants are a material."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Case:
    """One run: a card or a sample of it, on one path, by one rule.

    Parameters
    ----------
    key : str
        Digest of everything that goes into the case.
    card, path : str
        Names of the files, or of the path of the battery.
    rule : Rule
    sample : int
        0 is the card itself.
    """

    key: str
    card: str
    path: str
    rule: Rule
    sample: int


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _CardPaths:
    card: Card
    digest: str
    paths: tuple[tuple[str, str, Path], ...]  # name, digest, path


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Plan:
    """Cases of a sweep, and how to make the material and the path of each.

    Parameters
    ----------
    sweep : SweepFile
    entries : dict of str to _CardPaths
        By card file.
    """

    sweep: SweepFile
    entries: dict[str, _CardPaths]

    def __len__(self) -> int:
        runs = sum(len(entry.paths) for entry in self.entries.values())
        return runs * len(self.sweep.rules) * (self.sweep.samples + 1)

    def cases(self) -> Iterator[Case]:
        """Every case, samples of one card and path together."""
        for file, entry in self.entries.items():
            for name, digest, _ in entry.paths:
                for rule in self.sweep.rules:
                    for sample in range(self.sweep.samples + 1):
                        yield Case(
                            key=self._key(entry.digest, digest, rule, sample),
                            card=file,
                            path=name,
                            rule=rule,
                            sample=sample,
                        )

    def _key(self, card: str, path: str, rule: Rule, sample: int) -> str:
        drawn = {"seed": self.sweep.seed, "deviation": self.sweep.deviation, "sample": sample} if sample else {}
        parts = [__version__, card, path, rule.shift_rule, rule.recursion, drawn]
        return hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()

    def material(self, case: Case) -> Material:
        """The material of a case; a sample that is no material is drawn again."""
        entry = self.entries[case.card]
        if case.sample == 0:
            return entry.card.material()
        known = constants(entry.card)
        stream = int.from_bytes(hashlib.sha256(f"{entry.digest} {case.sample}".encode()).digest()[:8], "big")
        rng = np.random.default_rng([self.sweep.seed, stream])
        for _ in range(REDRAWS):
            values = {
                key: float(known[key].value) + float(rng.normal(0.0, deviation))
                for key, deviation in self.sweep.deviation.items()
            }
            try:
                return with_constants(entry.card, values).material()
            except CardproofError:
                continue
        raise SampleError(case.card, case.sample)

    def path(self, case: Case) -> Path:
        """The path of a case."""
        return next(path for name, _, path in self.entries[case.card].paths if name == case.path)


class SampleError(CardproofError, ValueError):
    """No draw of a sample was a material."""

    def __init__(self, card: str, sample: int) -> None:
        super().__init__(card, sample)
        self.card, self.sample = card, sample

    def __str__(self) -> str:
        return f"sample {self.sample} of {self.card}: {REDRAWS} draws were no material; the deviations are too large"


def _digest(file: str) -> str:
    return hashlib.sha256(FilePath(file).read_bytes()).hexdigest()


def plan_of(sweep: SweepFile) -> Plan:
    """Read all cards and paths of a sweep.

    Raises
    ------
    FilesError
        With the faults of all files.
    """
    cards = gather([lambda file=file: _read(file, sweep) for file in sweep.cards])  # type: ignore[misc]
    given = gather([lambda file=file: (file, _digest(file), read_path(file)) for file in sweep.paths])  # type: ignore[misc]
    entries = {}
    for card in cards:
        paths = tuple(given)
        if not paths:
            material = card.material()
            window = card_window(card, material)
            paths = tuple((path.name, f"battery {path.name}", path) for path in battery(material, window))
        entries[card.file] = _CardPaths(card=card, digest=_digest(card.file), paths=paths)
    return Plan(sweep=sweep, entries=entries)


def _read(file: str, sweep: SweepFile) -> Card:
    """A card that is a material and has every constant that is sampled."""
    card = read_card(file)
    card.material()
    known = constants(card)
    faults = [
        Fault(key=f'samples.deviation."{key}"', found="no such constant", expected="a key of the card with a number")
        for key in sweep.deviation
        if key not in known or isinstance(known[key].value, str)
    ]
    if faults:
        raise FileError(file, faults)
    return card
