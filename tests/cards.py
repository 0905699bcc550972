"""Card files for tests: a sound card as plain tables, changed key by key, and a TOML writer of the tests' own."""

from __future__ import annotations

import copy
import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from matlib.card import Card, read_card

SOUND: dict[str, Any] = {
    "name": "sealing resin",
    "revision": "2",
    "note": "invented",
    "units": {"stress": "MPa", "time": "s", "temperature": "degC"},
    "elastic": {"E": 3000.0, "nu": 0.35, "state": "instantaneous"},
    "prony": {
        "relative_to": "instantaneous",
        "shear": [[1e-6, 0.1], [1e-3, 0.1], [1.0, 0.2], [1e3, 0.2], [1e8, 0.1]],
        "bulk": [[1.0, 0.1]],
    },
    "shift": {
        "law": "wlf",
        "T_ref": 80.0,
        "C1": 14.2,
        "C2": 161.0,
        "base": 10,
        "measured": [-40.0, 130.0],
        "outside": "extrapolate",
    },
    "expansion": {"alpha": 6.2e-5},
    "service": {"temperature": [60.0, 110.0], "time": [1e-1, 1e2]},
}
"""A card with nothing to say about."""

GONE = object()
"""The value of a key that `changed` takes away."""


def changed(changes: Mapping[str, Any], tables: Mapping[str, Any] = SOUND) -> dict[str, Any]:
    """A copy of `tables` with other values at dotted keys, such as ``shift.C1``."""
    new = copy.deepcopy(dict(tables))
    for key, value in changes.items():
        *path, last = key.split(".")
        table = new
        for part in path:
            table = table.setdefault(part, {})
        if value is GONE:
            del table[last]
        else:
            table[last] = copy.deepcopy(value)
    return new


def toml(tables: Mapping[str, Any], prefix: str = "") -> str:
    """Plain tables as TOML; texts in it are free of control characters."""
    lines = [f"{key} = {_value(value)}" for key, value in tables.items() if not isinstance(value, Mapping)]
    for key, value in tables.items():
        if isinstance(value, Mapping):
            lines += [f"[{prefix}{key}]", toml(value, f"{prefix}{key}.")]
    return "\n".join(lines)


def _value(value: object) -> str:
    if isinstance(value, str):
        return json.dumps(value)
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, list):
        return f"[{', '.join(map(_value, value))}]"
    return repr(value)


def read(folder: Path, tables: Mapping[str, Any]) -> Card:
    """Write the tables to a file in `folder` and read it as a card."""
    file = folder / "a.card.toml"
    file.write_text(toml(tables), encoding="utf-8")
    return read_card(file)
