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
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["audit_data", "audit_figure", "audit_tables", "draw_checks", "replay_data", "replay_tables"]

LEAST = 1e-17
"""Smaller numbers are drawn as this."""


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
    """Measured against limit of every check."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.0, 4.6), layout="constrained")
    draw_checks(figure.add_subplot(), result)
    figure.legend(loc="outside upper left", ncols=3, frameon=False)
    return figure


def draw_checks(axes: Axes, result: AuditResult) -> None:
    """Measured against limit of every check that measures something, on one logarithmic axis."""
    from matplotlib.ticker import LogLocator

    from drivers.report.axes import INK, SECOND, finish

    checks = [check for check in reversed(result.checks) if check.measured is not None and check.limit is not None]
    limits = [max(check.limit or 0.0, LEAST) for check in checks]
    rows = range(len(checks))
    axes.plot(limits, rows, marker="|", color="black", markersize=14, markeredgewidth=2, linestyle="", label="limit")
    for holds, marker, colour, label in ((True, "o", INK, "holds"), (False, "X", SECOND["color"], "falls short")):
        chosen = [(max(c.measured or 0.0, LEAST), row) for row, c in enumerate(checks) if c.holds is holds]
        if chosen:
            x, y = zip(*chosen, strict=True)
            axes.plot(x, y, marker=marker, color=colour, markersize=8, linestyle="", label=label)
    axes.set_xscale("log")
    axes.xaxis.set_major_locator(LogLocator(numticks=6))
    axes.set_yticks(rows, [check.id for check in checks])
    finish(axes, "measured, and its limit [-]", "")


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
