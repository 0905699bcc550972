"""The audit of a routine as table, plain data and picture."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from rich.console import RenderableType
from rich.text import Text

from drivers.foreign.replay import ReplayResult
from drivers.report.data import envelope
from drivers.report.tables import plain_table, verdict_line
from drivers.studies.audit import AuditResult, CheckResult
from matlib.tensors import stress_from_mandel

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["audit_data", "audit_figure", "audit_tables", "replay_data", "replay_tables"]


def audit_data(result: AuditResult, routine: str, card: str | None) -> dict[str, Any]:
    """All checks as plain data."""
    checks = [
        {
            "id": check.id,
            "holds": check.holds,
            "measured": check.measured,
            "limit": check.limit,
            "message": check.message,
            "replay": check.replay,
        }
        for check in result.checks
    ]
    return envelope("audit", result.holds, routine=routine, card=card, checks=checks)


def _number(value: float | None) -> str:
    return "" if value is None else f"{value:.3g}"


def audit_tables(result: AuditResult, routine: str) -> list[RenderableType]:
    """Verdict, then every check, those that fall short first."""
    wrong = [check for check in result.checks if not check.holds]
    text = (
        f"{routine}: {len(wrong)} of {len(result.checks)} checks fall short"
        if wrong
        else f"{routine}: every check holds"
    )
    table = plain_table(
        "", [("check", "left"), ("", "left"), ("measured", "right"), ("limit", "right"), ("what it says", "left")]
    )
    for column in table.columns[:4]:
        column.no_wrap = True
    for check in [*wrong, *(check for check in result.checks if check.holds)]:
        table.add_row(check.id, _mark(check), _number(check.measured), _number(check.limit), Text(check.message))
    parts: list[RenderableType] = [verdict_line(result.holds, text), table]
    replays = [check.replay for check in wrong if check.replay]
    if replays:
        parts.append(Text(f"Run the increment that failed again: cardproof audit --replay {replays[0]}"))
    return parts


def _mark(check: CheckResult) -> Text:
    if check.holds and check.measured is None and check.limit is None:
        return Text("not run", style="yellow")
    return Text("holds", style="green") if check.holds else Text("wrong", style="bold red")


def audit_figure(result: AuditResult) -> Figure:
    """Measured against limit of every check, on one logarithmic axis."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.0, 4.6), layout="constrained")
    axes = figure.add_subplot()
    checks = [check for check in result.checks if check.measured is not None and check.limit is not None]
    for row, check in enumerate(reversed(checks)):
        assert check.measured is not None
        assert check.limit is not None
        colour = "#1b3a5c" if check.holds else "#b45309"
        axes.plot(
            max(check.measured, 1e-17),
            row,
            marker="o" if check.holds else "X",
            color=colour,
            markersize=8,
            linestyle="none",
        )
        axes.plot(
            max(check.limit, 1e-17), row, marker="|", color="black", markersize=16, markeredgewidth=2, linestyle="none"
        )
    axes.set_xscale("log")
    axes.set_yticks(range(len(checks)), [check.id for check in reversed(checks)])
    axes.set_xlabel("measured (disc: holds, cross: wrong) and limit (bar), relative; order: as observed [-]")
    axes.set_title("measured against limit", loc="left", fontsize=10, fontweight="bold")
    axes.grid(True, axis="x", color="#d1d5db", linewidth=0.5)
    axes.spines[["top", "right"]].set_visible(False)
    return figure


def replay_data(result: ReplayResult) -> dict[str, Any]:
    """What one increment gives now."""
    replay, update = result.replay, result.update
    return envelope(
        "audit",
        result.failure is None,
        replay=replay.file,
        routine=replay.routine_file,
        kind=replay.kind,
        now=None if result.failure is None else result.failure.kind,
        detail=replay.detail if result.failure is None else result.failure.detail,
        stress=None if update is None else stress_from_mandel(update.stress).tolist(),
    )


def replay_tables(result: ReplayResult) -> list[RenderableType]:
    """Whether the increment still fails, and how."""
    replay, failure = result.replay, result.failure
    if failure is not None:
        again = "as it did" if result.reproduced else f"otherwise than before ({replay.kind})"
        return [verdict_line(False, f"the increment fails {again}: {failure}")]
    assert result.update is not None
    stress = ", ".join(f"{value:.6g}" for value in stress_from_mandel(result.update.stress))
    return [
        verdict_line(
            True, f"the increment that failed ({replay.kind}) gives a stress now: {stress} Pa (11 22 33 23 13 12)"
        )
    ]
