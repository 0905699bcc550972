"""All cases of a sweep, each with a key that stands for everything that goes into it."""

from __future__ import annotations

import dataclasses
import hashlib
import json
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from functools import partial

import numpy as np

from drivers.battery import battery, card_window
from drivers.card_constants import constants, with_constants
from drivers.path import Path
from drivers.path_file import read_path
from drivers.studies.trial import Rule
from drivers.sweep.digest import digest
from drivers.sweep.sweep_file import SweepFile
from matlib.card import Card, plain, read_card
from matlib.errors import CardproofError, Fault, FileError, nearest_hint
from matlib.files import gather
from matlib.material import Material
from matlib.version import __version__

__all__ = ["MOST_CASES", "CardPaths", "Case", "Plan", "plan_of"]

REDRAWS = 50
"""Draws of a sample at most until its constants are a material."""

MOST_CASES = 2_000_000
"""More are refused: keys and rows are held in memory, about two kilobytes a case."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Case:
    """One run: a card or a sample of it, on one path, by one rule.

    Parameters
    ----------
    key : str
        Digest of everything that goes into the case.
    card, path : str
        Files as seen from the folder of the sweep file, or the name of a path of the battery.
    rule : Rule
    sample : int
        0 is the card itself.
    """

    key: str
    card: str
    path: str
    rule: Rule
    sample: int

    @property
    def problem(self) -> tuple[str, int, str]:
        """What the case shares its reference solution by: material and path."""
        return (self.card, self.sample, self.path)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CardPaths:
    """A card, its digest, and the paths that it is run along, by name."""

    card: Card
    digest: str
    paths: dict[str, Path]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Plan:
    """Cases of a sweep, and how to make the material and the path of each.

    Parameters
    ----------
    sweep : SweepFile
    entries : dict of str to CardPaths
        By card file.
    """

    sweep: SweepFile
    entries: dict[str, CardPaths]

    def __len__(self) -> int:
        runs = sum(len(entry.paths) for entry in self.entries.values())
        return runs * len(self.sweep.rules) * (self.sweep.samples + 1)

    @property
    def accuracy(self) -> float:
        """Half-width aimed at in the reference solutions: a thousandth of the tolerance, 1e-6 at most, 1e-9 at least."""
        return min(max(1e-3 * self.sweep.tolerance, 1e-9), 1e-6)

    def cases(self) -> Iterator[Case]:
        """Every case; those of one material and path follow each other, one a rule."""
        drawn = digest([self.sweep.seed, self.sweep.deviation])
        for file, entry in self.entries.items():
            for name, path in entry.paths.items():
                shared = [__version__, self.accuracy, file, entry.digest, name, digest(path)]
                start = hashlib.sha256(json.dumps(shared).encode())
                for sample in range(self.sweep.samples + 1):
                    for rule in self.sweep.rules:
                        mark = start.copy()
                        mark.update(f"{rule.shift_rule} {rule.recursion} {sample} {drawn if sample else ''}".encode())
                        yield Case(key=mark.hexdigest(), card=file, path=name, rule=rule, sample=sample)

    def part(self, cases: Iterable[Case]) -> Plan:
        """What of this plan some cases need, to be sent where they are run."""
        needed: dict[str, dict[str, Path]] = {}
        for case in cases:
            needed.setdefault(case.card, {})[case.path] = self.path(case)
        entries = {file: dataclasses.replace(self.entries[file], paths=paths) for file, paths in needed.items()}
        return Plan(sweep=dataclasses.replace(self.sweep, cards=(), paths=()), entries=entries)

    def material(self, card: str, sample: int) -> Material:
        """A card's material, or a sample of it; a sample that is no material is drawn again."""
        entry = self.entries[card]
        if sample == 0:
            return entry.card.material()
        known = constants(entry.card)
        stream = int.from_bytes(hashlib.sha256(f"{entry.digest} {sample}".encode()).digest()[:8], "big")
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
        raise SampleError(card, sample)

    def path(self, case: Case) -> Path:
        """The path of a case."""
        return self.entries[case.card].paths[case.path]


class SampleError(CardproofError, ValueError):
    """No draw of a sample was a material."""

    def __init__(self, card: str, sample: int) -> None:
        super().__init__(card, sample)
        self.card, self.sample = card, sample

    def __str__(self) -> str:
        return f"sample {self.sample} of {self.card}: {REDRAWS} draws were no material; the deviations are too large"


def plan_of(sweep: SweepFile) -> Plan:
    """Read all cards and paths of a sweep.

    Raises
    ------
    FilesError
        With the faults of all files.
    FileError
        If there are more than `MOST_CASES` cases.
    """
    cards: dict[str, Card] = {}
    paths: dict[str, Path] = {}

    def read(name: str, *, is_card: bool) -> None:
        file = str(sweep.folder / name)
        if is_card:
            cards[name] = _card(file, name, sweep)
        else:
            paths[name] = read_path(file)

    tasks = [partial(read, name, is_card=True) for name in sweep.cards]
    gather([*tasks, *(partial(read, name, is_card=False) for name in sweep.paths)])
    entries = {
        name: CardPaths(card=card, digest=digest(plain(card.document)), paths=paths or _battery(card))
        for name, card in cards.items()
    }
    plan = Plan(sweep=sweep, entries=entries)
    if len(plan) > MOST_CASES:
        raise FileError(sweep.file, [Fault(key="cases", found=str(len(plan)), expected=f"at most {MOST_CASES} cases")])
    return plan


def _battery(card: Card) -> dict[str, Path]:
    """The battery of a card by name; of two paths with one name the second is numbered, unless it is the same path."""
    material = card.material()
    named: dict[str, Path] = {}
    for path in battery(material, card_window(card, material)):
        name, number = path.name, 1
        while name in named and digest(named[name]) != digest(path):
            number += 1
            name = f"{path.name} ({number})"
        named[name] = path
    return named


def _card(file: str, name: str, sweep: SweepFile) -> Card:
    """A card that is a material and has every constant that is sampled."""
    card = read_card(file)
    card.material()
    known = {key: constant for key, constant in constants(card).items() if not isinstance(constant.value, str)}
    faults = []
    for key in sweep.deviation:
        if key not in known:
            expected, hint = "a key with a number in every card", nearest_hint(key, known)
            fault = Fault(key=f'samples.deviation."{key}"', found=f"none in {name}", expected=expected, hint=hint)
            faults.append(fault)
    if faults:
        raise FileError(sweep.file, faults)
    return card
