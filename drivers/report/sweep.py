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
    from matplotlib.figure import Figure

__all__ = ["sweep_data", "sweep_figure", "sweep_tables"]

WORST_SHOWN = 10


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
        worst=[_case(row) for row in _worst(result)],
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


def _worst(result: SweepResult) -> list[dict[str, Any]]:
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
    for row in _worst(result):
        rule = f"{row['shift_rule']}, {row['recursion']}"
        table.add_row(percent(row["relative_error"]), row["card"], row["path"], rule, str(row["sample"] or ""))
    return table


def sweep_figure(result: SweepResult) -> Figure:
    """Distribution of the errors of all cases, the tolerance as a line."""
    import numpy as np
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.0, 4.2), layout="constrained")
    axes = figure.add_subplot()
    errors = np.array([max(row["relative_error"], 1e-12) for row in result.rows if row["error"] is None] or [1e-12])
    low, high = np.floor(np.log10(errors.min())), np.ceil(np.log10(errors.max()) + 1e-9)
    axes.hist(errors, bins=np.logspace(low, max(high, low + 1.0), 41).tolist(), color="#1b3a5c")
    axes.axvline(result.plan.sweep.tolerance, color="#b45309", linestyle="--", label="tolerance")
    axes.set_xscale("log")
    axes.set_xlabel("largest error of a case, as a fraction of the peak [-]")
    axes.set_ylabel("cases [-]")
    axes.set_title(
        f"{result.plan.sweep.name}: errors of {errors.size} cases", loc="left", fontsize=10, fontweight="bold"
    )
    axes.spines[["top", "right"]].set_visible(False)
    axes.legend(frameon=False)
    return figure
