"""Baselines for tests: the sound card of `tests.cards` recorded on a few paths of its battery."""

from __future__ import annotations

import io
from collections.abc import Iterable, Mapping
from pathlib import Path as FilePath
from typing import Any

from rich.console import Console, RenderableType

from drivers.baseline_file import Baseline, write_baseline
from drivers.battery import battery, card_window
from drivers.path import Path
from drivers.studies.baseline import record_paths
from matlib.card import Card, parse_card
from tests.cards import SOUND, changed, toml

FEW = ("relaxation, 60 degC", "creep, 85 degC", "clamped cooling")

PATH_FILE = """
name = "pull and dwell"
mode = "uniaxial stress"
[units]
time = "s"
temperature = "degC"
[start]
temperature = 80.0
[[segment]]
label = "pull"
duration = 10.0
strain = 0.01
[[segment]]
label = "dwell"
duration = 100.0
"""


def sound(changes: Mapping[str, Any] | None = None) -> Card:
    """The sound card, some keys changed."""
    return parse_card(changed(changes or {}), "a.card.toml")


def few_paths(names: tuple[str, ...] = FEW) -> tuple[Path, ...]:
    """Paths of the sound card's battery by name."""
    card = sound()
    paths = {path.name: path for path in battery(card.material(), card_window(card, card.material()))}
    return tuple(paths[name] for name in names)


def recorded(tolerance: float = 0.01, names: tuple[str, ...] = FEW, card: Card | None = None) -> Baseline:
    """Baseline of the sound card, or of another, on a few paths."""
    card = card or sound()
    paths = few_paths(names)
    return Baseline.of(card, record_paths(card.material(), paths, [tolerance] * len(paths)))


def written(folder: FilePath, name: str, baseline: Baseline, changes: Mapping[str, Any] | None = None) -> FilePath:
    """A card, the sound one with some keys changed, and a baseline beside it; gives the card's file."""
    write_baseline(folder / f"{name}.baseline.json", baseline)
    card = folder / f"{name}.card.toml"
    card.write_text(toml(changed(changes or {}, SOUND)), encoding="utf-8")
    return card


def shown(tables: Iterable[RenderableType]) -> str:
    """Tables as a wide terminal shows them, white space made single."""
    console = Console(file=io.StringIO(), width=400, highlight=False, markup=False, emoji=False)
    for table in tables:
        console.print(table)
    assert isinstance(console.file, io.StringIO)
    return " ".join(console.file.getvalue().split())
