"""Results as plain data for JSON: SI units throughout, nothing that is not a finite number."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from matlib.admissibility import Finding, is_admissible
from matlib.card import Card
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.version import __version__

if TYPE_CHECKING:  # a check or a conversion loads no studies
    from drivers.difference import Where
    from drivers.history import History
    from drivers.path import Path
    from drivers.reference import Reference
    from drivers.studies.compare import Comparison, PathComparison
    from drivers.studies.slips import Slip
    from drivers.studies.trial import Rule
    from drivers.subject import Subject
    from matlib.card_conversion import ConvertedCard

__all__ = ["checks_data", "comparison_data", "conversion_data", "drive_data", "envelope", "json_text", "place_data"]

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
        service_error_decades=None if converted.service_error is None else converted.service_error[0],
        service_error_at=None if converted.service_error is None else converted.service_error[1],
        law=converted.shift["law"],
        constants={key: value for key, value in converted.shift.items() if key != "law"},
        time_factor=conversion.time_factor,
        file=file,
        card_units=converted.units,
    )


def _how_data(how: Rule | Reference) -> dict[str, Any]:
    from drivers.studies.trial import Rule

    if isinstance(how, Rule):
        return {"exact": False, "shift_rule": how.shift_rule, "recursion": how.recursion}
    return {"exact": True, "reference": {"relative_bound": how.relative_bound, "estimated": how.estimated}}


def drive_data(
    history: History, subject: Subject, path: Path, *, file: str | None, how: Rule | Reference
) -> dict[str, Any]:
    """What a run of a path gave, in short; its rows are in the CSV file."""
    last = len(history) - 1
    return envelope(
        "drive",
        True,
        **subject_data(subject),
        path=path.name,
        rows=len(history),
        file=file,
        **_how_data(how),
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
    difference = result.difference
    return {
        "name": result.path.name,
        "quantity": None if difference is None else difference.quantity,
        "component": None if difference is None else difference.component,
        "largest_difference": None if difference is None else difference.value,
        "relative": result.relative,
        "bound": result.bound,
        "estimated": result.estimated,
        "identical": result.identical,
        "rounding": result.rounding,
        "at": None if difference is None else place_data(difference.at),
        "holds": result.holds,
        "reason": result.reason,
    }


def place_data(at: Where) -> dict[str, Any]:
    """Segment, time and temperature."""
    return {"segment": at.segment, "time": at.time, "temperature": at.temperature}


def slip_data(slip: Slip) -> dict[str, Any]:
    """One explanation of a difference."""
    return {
        "id": slip.id,
        "ids": list(slip.ids),
        "explanation": slip.explanation,
        "remaining": slip.remaining,
        "twins": list(slip.twins),
    }


def subject_data(subject: Subject) -> dict[str, Any]:
    """Name of a card; or of a routine, and of the card that it is meant to be."""
    if isinstance(subject, Card):
        return {"card": subject.document.name}
    return {"routine": subject.name, "card": None if subject.card is None else subject.card.document.name}


def comparison_data(comparison: Comparison, a: Subject, b: Subject, slips: Sequence[Slip] = ()) -> dict[str, Any]:
    """Verdict of a comparison of two cards or routines, and the slips that explain a difference of cards."""
    from drivers.subject import short_name

    shift = comparison.shift
    return envelope(
        "compare",
        comparison.holds,
        cards=[
            {"name": short_name(one), "file": one.file, "kind": "card" if isinstance(one, Card) else "routine"}
            for one in (a, b)
        ],
        basis=comparison.basis,
        same=comparison.same,
        tolerance=comparison.tolerance,
        shift={
            "largest_difference_decades": shift.decades,
            "at_temperature": shift.temperature,
            "reason": shift.reason,
        },
        paths=[_path_data(result) for result in comparison.paths],
        slips=[slip_data(slip) for slip in slips],
    )
