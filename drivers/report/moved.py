"""What moved, in sentences and as plain data."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from drivers.report.tables import percent
from drivers.studies.bench import Change
from drivers.studies.moved import Moved
from drivers.studies.moved_constants import ConstantChange

__all__ = ["moved_data", "moved_sentence"]

NAMED = 4
"""Constants that a sentence names at most; the rest are counted."""


def moved_data(moved: Sequence[Moved]) -> list[dict[str, Any]]:
    """Every part that moved."""
    return [
        {
            "part": one.part,
            "effect": one.effect.relative,
            "path": one.effect.path,
            "put_in": one.put_in.relative,
            "taken_back": one.taken_back.relative,
            "matters": one.matters,
            "together": list(one.together),
            "constants": [_constant_data(constant) for constant in one.constants],
            "sentence": moved_sentence(one),
        }
        for one in moved
    ]


def _constant_data(constant: ConstantChange) -> dict[str, Any]:
    return {
        "key": constant.key,
        "was": constant.was,
        "now": constant.now,
        "unit": constant.unit,
        "effect": constant.effect,
        "matters": constant.matters,
        "together": list(constant.together),
    }


def moved_sentence(moved: Moved) -> str:
    """One part in a sentence: what moved, how much of the behaviour that is, and what undoes it."""
    effect = _effect_text(moved.effect)
    if moved.matters:
        text = f"{moved.part}: matters, {effect}"
    elif moved.together:
        text = f"{moved.part}: moved without effect, {effect} alone, which {_and(moved.together)} undoes"
    else:
        text = f"{moved.part}: moved without effect that matters, {effect}"
    traded = [constant for constant in moved.constants if constant.together]
    rest = [constant for constant in moved.constants if not constant.together]
    rest.sort(key=lambda constant: (not constant.matters, -(constant.effect or 0.0)))
    parts = [f"{_and([_constant_text(c) for c in traded])} moved together without effect"] if traded else []
    parts += [_constant_text(constant) for constant in rest[:NAMED]]
    parts += [f"{len(rest) - NAMED} more constants"] if len(rest) > NAMED else []
    return f"{text}; {', '.join(parts)}" if parts else text


def _effect_text(change: Change) -> str:
    if change.relative is None:
        return "there is no response with it"
    return f"{percent(change.relative)} of the peak on path {change.path!r}"


def _constant_text(constant: ConstantChange) -> str:
    unit = f" {constant.unit}" if constant.unit else ""
    if constant.was is None:
        return f"{constant.key} is new, {_value(constant.now)}{unit}"
    if constant.now is None:
        return f"{constant.key} is gone, was {_value(constant.was)}{unit}"
    alone = "" if constant.effect is None else f" ({percent(constant.effect)} alone)"
    return f"{constant.key} from {_value(constant.was)} to {_value(constant.now)}{unit}{alone}"


def _value(value: float | int | str | None) -> str:
    return value if isinstance(value, str) else f"{value:.6g}"


def _and(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
