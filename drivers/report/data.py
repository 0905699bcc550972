"""Results as plain data for JSON: SI units throughout, nothing that is not a finite number."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any

from drivers.history import History
from drivers.path import Path
from drivers.studies.compare import Comparison, PathComparison
from matlib.admissibility import Finding, is_admissible
from matlib.card import Card
from matlib.card_conversion import ConvertedCard
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.version import __version__

__all__ = ["checks_data", "comparison_data", "conversion_data", "drive_data", "envelope", "json_text"]

UNITS = {"stress": "Pa", "time": "s", "temperature": "K"}


def envelope(command: str, holds: bool, **content: Any) -> dict[str, Any]:
    """What every command's JSON starts with."""
    verdict = "holds" if holds else "falls short"
    return {"command": command, "version": __version__, "verdict": verdict, "units": UNITS, **content}


def json_text(data: dict[str, Any]) -> str:
    """Strict JSON; a NaN or an infinity is an error of ours, never written."""
    return json.dumps(data, indent=2, allow_nan=False) + "\n"


def checks_data(results: Sequence[tuple[Card, Sequence[Finding]]]) -> dict[str, Any]:
    """Findings of all cards."""
    cards = [
        {
            "name": card.document.name,
            "file": card.file,
            "findings": [{"id": f.id, "severity": f.severity, "message": f.message} for f in findings],
        }
        for card, findings in results
    ]
    return envelope("check", all(is_admissible(list(findings)) for _, findings in results), cards=cards)


def conversion_data(converted: ConvertedCard, file: str) -> dict[str, Any]:
    """What a conversion made; constants in the units of the new card."""
    conversion = converted.conversion
    return envelope(
        "convert",
        True,
        exact=conversion.exact,
        largest_error_decades=conversion.largest_error_decades,
        error_at=conversion.error_at,
        fitted_range=None if conversion.fitted_range is None else list(conversion.fitted_range),
        law=converted.shift["law"],
        constants={key: value for key, value in converted.shift.items() if key != "law"},
        time_factor=conversion.time_factor,
        file=file,
        card_units=converted.units,
    )


def drive_data(
    history: History, card: Card, path: Path, *, file: str | None, shift_rule: str, recursion: str
) -> dict[str, Any]:
    """What a run of a path gave, in short; its rows are in the CSV file."""
    last = len(history) - 1
    return envelope(
        "drive",
        True,
        card=card.document.name,
        path=path.name,
        rows=len(history),
        file=file,
        shift_rule=shift_rule,
        recursion=recursion,
        increments=path.increment_count,
        peak_stress=history.peak_stress,
        end={
            "time": float(history.time[last]),
            "temperature": float(history.temperature[last]),
            "reduced_time": None if history.reduced_time is None else float(history.reduced_time[last]),
            "strain": dict(zip(STRAIN_COMPONENTS, history.strain_components[last].tolist(), strict=True)),
            "stress": dict(zip(STRESS_COMPONENTS, history.stress_components[last].tolist(), strict=True)),
        },
    )


def _path_data(result: PathComparison) -> dict[str, Any]:
    at = result.at
    return {
        "name": result.path.name,
        "quantity": result.quantity,
        "largest_difference": result.largest_difference,
        "relative": result.relative,
        "rounding": result.rounding,
        "at": None if at is None else {"segment": at.segment, "time": at.time, "temperature": at.temperature},
        "holds": result.holds,
        "reason": result.reason,
    }


def comparison_data(comparison: Comparison, a: Card, b: Card) -> dict[str, Any]:
    """Verdict of a comparison of two cards."""
    shift = comparison.shift
    return envelope(
        "compare",
        comparison.holds,
        cards=[{"name": card.document.name, "file": card.file} for card in (a, b)],
        same=comparison.same,
        tolerance=comparison.tolerance,
        shift={
            "largest_difference_decades": shift.decades,
            "at_temperature": shift.temperature,
            "reason": shift.reason,
        },
        paths=[_path_data(result) for result in comparison.paths],
    )
