"""A sweep as table, plain data and picture."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from drivers.report.data import envelope
from drivers.report.tables import percent, plain_table, verdict_line
from drivers.sweep.run import SweepResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["draw_distribution", "draw_worst", "sweep_data", "sweep_figure", "sweep_tables", "worst_cases"]

WORST_SHOWN = 10
LEAST = 1e-12
"""Errors below this are drawn as this."""


def sweep_data(result: SweepResult, csv: str | None, parquet: str | None) -> dict[str, Any]:
    """The summary as plain data; every row is in the database."""
    sweep = result.plan.sweep
    return envelope(
        "sweep",
        result.holds,
        name=sweep.name,
        cases=len(result.plan),
        ran=result.ran,
        failed=len(result.failed),
        beyond_tolerance=len(result.beyond),
        tolerance=sweep.tolerance,
        database=str(sweep.database),
        csv=csv,
        parquet=parquet,
        worst=[_case(row) for row in worst_cases(result)],
        failures=[_case(row) for row in result.failed[:WORST_SHOWN]],
    )


def _case(row: dict[str, Any]) -> dict[str, Any]:
    names = (
        "card",
        "path",
        "shift_rule",
        "recursion",
        "sample",
        "relative_error",
        "reference_bound",
        "peak_stress",
        "error",
    )
    return {name: row[name] for name in names}


def worst_cases(result: SweepResult) -> list[dict[str, Any]]:
    """The cases with the largest errors."""
    finished = [row for row in result.rows if row["error"] is None]
    return sorted(finished, key=lambda row: -row["relative_error"])[:WORST_SHOWN]


def sweep_tables(result: SweepResult) -> list[RenderableType]:
    """Verdict, the worst cases, the failures."""
    sweep = result.plan.sweep
    text = f"{sweep.name}: {len(result.rows)} cases, {result.ran} of them run now"
    if result.failed:
        text += f"; {len(result.failed)} failed"
    if result.beyond:
        text += f"; {len(result.beyond)} beyond {percent(sweep.tolerance)}"
    parts: list[RenderableType] = [verdict_line(result.holds, text), Text(f"Every row is in {sweep.database}.")]
    parts.append(_worst_table(result))
    for row in result.failed[:WORST_SHOWN]:
        where = f"{row['card']}, {row['path']}, sample {row['sample']}"
        parts.append(Text.assemble(("failed: ", "bold red"), f"{where}: {row['error']}"))
    return parts


def _worst_table(result: SweepResult) -> Table:
    columns = [("error", "right"), ("card", "left"), ("path", "left"), ("rule", "left"), ("sample", "right")]
    table = plain_table("Largest errors of the path's own increments", columns)
    for row in worst_cases(result):
        rule = f"{row['shift_rule']}, {row['recursion']}"
        table.add_row(percent(row["relative_error"]), row["card"], row["path"], rule, str(row["sample"] or ""))
    return table


def sweep_figure(result: SweepResult) -> Figure:
    """Distribution of the errors of all cases, the tolerance as a line."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.0, 4.2), layout="constrained")
    axes = figure.add_subplot()
    draw_distribution(axes, result)
    axes.set_title(f"{result.plan.sweep.name}: errors", loc="left", fontsize=10, fontweight="bold", parse_math=False)
    axes.legend(frameon=False)
    return figure


def draw_distribution(axes: Axes, result: SweepResult) -> None:
    """How many cases have which error."""
    import numpy as np

    from drivers.report.axes import INK, LIMIT, finish

    errors = np.array([max(row["relative_error"], LEAST) for row in result.rows if row["error"] is None] or [LEAST])
    low, high = np.floor(np.log10(errors.min())), np.ceil(np.log10(errors.max()) + 1e-9)
    axes.hist(errors, bins=np.logspace(low, max(high, low + 1.0), 41).tolist(), color=INK, label="cases")
    axes.axvline(result.plan.sweep.tolerance, label="tolerance", **LIMIT)
    axes.set_xscale("log")
    finish(axes, "largest error of a case / peak [-]", "cases [-]")


def draw_worst(axes: Axes, result: SweepResult) -> None:
    """The largest errors, one a row."""
    from pathlib import Path

    from drivers.report.axes import INK, LIMIT, SECOND, finish, short_name

    rows = list(reversed(worst_cases(result)))
    over = {id(row) for row in result.beyond}
    for k, row in enumerate(rows):
        beyond = id(row) in over
        axes.plot(
            [max(row["relative_error"], LEAST)], [k], marker="s" if beyond else "o", linestyle="",
            color=SECOND["color"] if beyond else INK,
        )  # fmt: skip
    axes.axvline(result.plan.sweep.tolerance, label="tolerance", **LIMIT)
    axes.set_xscale("log")
    cards = [short_name(Path(row["card"]).name.partition(".")[0]) for row in rows]
    names = [f"{card} {row['sample'] or ''}".strip() for card, row in zip(cards, rows, strict=True)]
    axes.set_yticks(range(len(rows)), names, parse_math=False)
    finish(axes, "largest error of a case / peak [-]", "card, sample")
