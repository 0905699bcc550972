"""One thing to know about a card."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

__all__ = ["Finding", "Severity", "is_admissible"]

Severity = Literal["error", "warning", "note"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One thing to know about a card.

    Parameters
    ----------
    id : str
        Stable name, for scripts.
    severity : {"error", "warning", "note"}
        "error": the card cannot be used as it is; "warning": somebody has to decide; "note": good to know.
    message : str
        One sentence with the numbers and what to do.
    """

    id: str
    severity: Severity
    message: str


def is_admissible(findings: Iterable[Finding]) -> bool:
    """Whether no finding is an error."""
    return all(finding.severity != "error" for finding in findings)
