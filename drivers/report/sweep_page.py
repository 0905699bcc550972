"""The page of a sweep."""

from __future__ import annotations

from drivers.report.axes import label_lines, small_figure
from drivers.report.page import Fact, Origin, Page, PageTable, picture
from drivers.report.parts import parts_of
from drivers.report.sweep import draw_distribution, draw_worst, sweep_tables, worst_cases
from drivers.report.tables import percent
from drivers.sweep.run import SweepResult

__all__ = ["sweep_page"]

MOST = 200
"""Failed cases on the page; the database has all."""


def sweep_page(result: SweepResult, origin: Origin) -> Page:
    """How the errors of all cases are distributed, the worst and the failed."""
    sweep = result.plan.sweep
    parts = parts_of(sweep_tables(result))
    worst, tolerance = worst_cases(result), percent(sweep.tolerance)
    largest = percent(worst[0]["relative_error"]) if worst else "none"
    facts = [
        Fact(label="Cases", value=str(len(result.plan)), against=f"{result.ran} run now"),
        Fact(label="Failed", value=str(len(result.failed)), against="none allowed"),
        Fact(label="Beyond the tolerance", value=str(len(result.beyond)), against=f"{tolerance} of a peak"),
        Fact(label="Largest error", value=largest, against=f"tolerance {tolerance}"),
    ]
    figure, axes = small_figure()
    draw_distribution(axes, result)
    label_lines(figure)
    finding = f"{len(result.beyond)} of {len(result.plan)} cases lie beyond the tolerance, {tolerance}."
    pictures = [picture(figure, "Errors of all cases", finding)]
    if worst:
        figure, axes = small_figure()
        draw_worst(axes, result)
        label_lines(figure)
        row = worst[0]
        at = f"card {row['card']} on path {row['path']}"
        finding = f"Worst: {percent(row['relative_error'])}, {at}. Squares are beyond the tolerance."
        pictures.append(picture(figure, "Worst cases", finding))
    paths = "the battery of each card" if not sweep.paths else _count(len(sweep.paths), "path")
    what = f"{_count(len(sweep.cards), 'card')}, {paths}, {_count(len(sweep.rules), 'rule')}"
    drawn = {"Samples of a card": str(sweep.samples), "Seed": str(sweep.seed)} if sweep.samples else {}
    return Page(
        title=f"Swept: {sweep.name} ({sweep.file}): {what}",
        holds=result.holds,
        verdict=parts.verdict,
        lead=[line for line in parts.lead if not line.startswith("failed: ")],
        facts=facts,
        pictures=pictures,
        tables=[*parts.tables, *_failures(result)],
        origin=origin,
        settings={"Tolerance": tolerance, **drawn},
    )


def _count(number: int, name: str) -> str:
    return f"{number} {name}{'' if number == 1 else 's'}"


def _failures(result: SweepResult) -> list[PageTable]:
    failed = result.failed
    if not failed:
        return []
    rows = [[str(row["card"]), str(row["path"]), str(row["sample"]), str(row["error"])] for row in failed[:MOST]]
    caption = f"Failed cases{f', the first {MOST} of {len(failed)}' if len(failed) > MOST else ''}"
    return [PageTable(caption=caption, headers=["card", "path", "sample", "why"], rows=rows, wide=[3])]
