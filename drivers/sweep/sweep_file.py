"""Read a sweep from its file."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path as FilePath
from typing import Annotated, Literal

from pydantic import Field

from drivers.studies.trial import Rule
from matlib.documents import Document, validated
from matlib.errors import Fault, FaultyInputError
from matlib.files import read_toml, shown

__all__ = ["SweepFile", "read_sweep"]

Patterns = Annotated[list[Annotated[str, Field(min_length=1)]], Field(min_length=1, max_length=1000)]
Deviation = Annotated[float, Field(gt=0.0, le=1e60)]


class RuleTable(Document):
    """An update rule."""

    shift_rule: Literal["start", "end", "middle", "mean-rate", "mean-log", "integrated"] = "integrated"
    recursion: Literal["exponential", "midpoint", "trapezoidal", "backward-euler"] = "exponential"


class CasesTable(Document):
    """``[cases]``: what is combined with what."""

    cards: Patterns = Field(description='a list of card files or patterns, such as ["cards/*.card.toml"]')
    paths: Patterns | None = None
    rules: Annotated[list[RuleTable], Field(min_length=1, max_length=24)] = Field(default_factory=lambda: [RuleTable()])
    tolerance: Annotated[float, Field(ge=1e-9, le=1.0)] = 0.01


class SamplesTable(Document):
    """``[samples]``: constants drawn from their scatter."""

    count: Annotated[int, Field(ge=1, le=1_000_000)] = Field(description="how many samples of each card")
    seed: Annotated[int, Field(ge=0)] = 0
    deviation: Annotated[dict[str, Deviation], Field(min_length=1)] = Field(
        description='a table [samples.deviation] with standard deviations, such as "shift.C1" = 0.2'
    )


class OutputTable(Document):
    """``[output]``: where results go."""

    database: Annotated[str, Field(min_length=1)] = "sweep.sqlite"


class SweepDocument(Document):
    """A sweep file."""

    name: Annotated[str, Field(min_length=1, max_length=200, description="the sweep's name")]
    note: str = ""
    cases: CasesTable = Field(description="a table [cases] with cards")
    samples: SamplesTable | None = None
    output: OutputTable = Field(default_factory=OutputTable)


@dataclass(frozen=True, slots=True, kw_only=True)
class SweepFile:
    """A sweep as it was read, its files found.

    Parameters
    ----------
    file : str
    folder : FilePath
        Of the sweep file: where everything that it names is looked for.
    name : str
    cards, paths : tuple of str
        Files as seen from `folder`; no paths stand for the battery of each card.
    rules : tuple of Rule
    tolerance : float
    samples : int
        Samples of each card; 0 for the card itself alone.
    seed : int
    deviation : dict of str to float
        Standard deviations by key, in the units of each card.
    database : FilePath
    """

    file: str
    folder: FilePath
    name: str
    cards: tuple[str, ...]
    paths: tuple[str, ...]
    rules: tuple[Rule, ...]
    tolerance: float
    samples: int
    seed: int
    deviation: dict[str, float]
    database: FilePath


def _found(folder: FilePath, patterns: list[str], key: str) -> tuple[tuple[str, ...], list[Fault]]:
    """Files that match, each once, in order; a pattern without a match is a fault."""
    files: dict[str, None] = {}
    faults = []
    for k, pattern in enumerate(patterns, start=1):
        try:
            matches = sorted(os.path.relpath(match, folder) for match in folder.glob(pattern) if match.is_file())
        except (ValueError, NotImplementedError, OSError) as error:
            faults.append(
                Fault(key=f"{key}[{k}]", found=shown(pattern), expected=f"a pattern relative to the file ({error})")
            )
            continue
        if not matches:
            faults.append(Fault(key=f"{key}[{k}]", found=shown(pattern), expected="at least one file that matches"))
        files.update(dict.fromkeys(matches))
    return tuple(files), faults


def _repeated(rules: list[RuleTable]) -> list[Fault]:
    """A rule given twice is a fault: its cases would be one and the same."""
    first: dict[tuple[str, str], int] = {}
    faults = []
    for k, rule in enumerate(rules, start=1):
        same = first.setdefault((rule.shift_rule, rule.recursion), k)
        if same != k:
            found = f"{rule.shift_rule}, {rule.recursion}, as in cases.rules[{same}]"
            faults.append(Fault(key=f"cases.rules[{k}]", found=found, expected="each rule once", hint="remove one"))
    return faults


def read_sweep(file: str | FilePath) -> SweepFile:
    """Read a sweep file and find the files that it names.

    Parameters
    ----------
    file : str or Path

    Returns
    -------
    SweepFile

    Raises
    ------
    FileError
        With every fault at once.
    """
    path = FilePath(file)
    data = read_toml(file)
    try:
        document = validated(SweepDocument, data)
        cards, faults = _found(path.parent, document.cases.cards, "cases.cards")
        paths: tuple[str, ...] = ()
        if document.cases.paths is not None:
            paths, more = _found(path.parent, document.cases.paths, "cases.paths")
            faults += more
        faults += _repeated(document.cases.rules)
        database = path.parent / document.output.database
        if not database.parent.is_dir():
            faults.append(
                Fault(key="output.database", found=shown(document.output.database), expected="a folder that exists")
            )
        if faults:
            raise FaultyInputError(faults)
    except FaultyInputError as error:
        raise error.in_file(str(file)) from None
    samples = document.samples
    return SweepFile(
        file=str(file),
        folder=path.parent,
        name=document.name,
        cards=cards,
        paths=paths,
        rules=tuple(Rule(shift_rule=r.shift_rule, recursion=r.recursion) for r in document.cases.rules),
        tolerance=document.cases.tolerance,
        samples=0 if samples is None else samples.count,
        seed=0 if samples is None else samples.seed,
        deviation={} if samples is None else dict(samples.deviation),
        database=database,
    )
