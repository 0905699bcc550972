"""The study of increments as pictures."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure

from drivers.report.axes import FIRST, INK, LIMIT, draw_line, finish, short_name, time_unit
from drivers.studies.ladder import RuleResult
from drivers.studies.steps import StepsResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["draw_course", "draw_ladder", "steps_figure"]

MARKS = ("o", "s", "^", "D", "v", "P")
COLOURS = {"exponential": INK, "midpoint": "#c2570c", "trapezoidal": "#0f766e", "backward-euler": "#6b7280"}
DASHES = {"exponential": "-", "midpoint": "--", "trapezoidal": "-.", "backward-euler": ":"}
LEAST = 1e-16
"""Errors below this are drawn as this."""

MOST_SEGMENTS = 60


def steps_figure(result: StepsResult) -> Figure:
    """Error against increments, one line a rule."""
    figure = Figure(figsize=(9.0, 6.0), layout="constrained")
    axes = figure.add_subplot()
    draw_ladder(axes, result, result.rules, f"{result.path.name}: error against increments")
    figure.legend(loc="outside right upper", fontsize=7, frameon=False, title="rule, observed order", title_fontsize=8)
    return figure


def draw_ladder(axes: Axes, result: StepsResult, rules: Sequence[RuleResult], title: str = "") -> None:
    """Error against increments, one line a rule, with slopes to read them by, the tolerance, and the path's own."""
    shift_rules = list(dict.fromkeys(r.rule.shift_rule for r in result.rules))
    one = len({rule.rule.recursion for rule in rules}) == 1 < len(rules)
    for rule in rules:
        order = "" if rule.order is None else f"  {rule.order:.1f}"
        place = shift_rules.index(rule.rule.shift_rule) % len(MARKS)
        axes.loglog(
            [rung.increments for rung in rule.errors],
            [max(rung.relative_error, LEAST) for rung in rule.errors],
            color=COLOURS.get(rule.rule.recursion, INK),
            linestyle=tuple(DASHES.values())[place % 4] if one else DASHES.get(rule.rule.recursion, "-"),
            marker=MARKS[place],
            markersize=4,
            linewidth=1.2,
            label=f"{rule.rule.shift_rule if one else rule.rule}{order}",
        )
    axes.axhline(result.tolerance, label="tolerance", **LIMIT)
    if any(rule.rule == result.rule for rule in rules):
        own, count = max(result.own.relative, LEAST), result.path.increment_count
        axes.plot(count, own, marker="*", markersize=13, color="#9f1239", linestyle="", label="own")
    _draw_slopes(axes, rules)
    finish(axes, "increments of the whole path [-]", "largest error / peak [-]", title)


def _draw_slopes(axes: Axes, rules: Sequence[RuleResult]) -> None:
    """Slopes 1 and 2 to read the lines by, from a corner that the lines leave free."""
    counts = [rung.increments for rule in rules for rung in rule.errors] or [10]
    errors = [rung.relative_error for rule in rules for rung in rule.errors if rung.relative_error > 0.0] or [1e-2]
    left, right, foot = min(counts), min(counts) * 4, min(errors) / 4.0
    for slope in (1, 2):
        top = foot * 4.0**slope
        axes.plot([left, right], [top, foot], color="#6b7280", linewidth=0.8)
        axes.annotate(f"order {slope}", (left, top), fontsize=8, textcoords="offset points", xytext=(-2, 3))


def draw_course(axes: Axes, result: StepsResult) -> None:
    """The error of the path's own increments over its time; the segment that is to blame is shaded."""
    course = result.course
    clock = time_unit(float(course.time[-1]))
    time = np.asarray(clock.from_si(course.time))
    draw_line(axes, time, np.maximum(course.error, LEAST), label="own increments", **FIRST)
    axes.axhline(result.tolerance, label="tolerance", **LIMIT)
    if result.blame is not None:
        label: str | None = short_name(f"segment {result.blame.segment}")
        for first, last in _runs(course.segment, result.blame.segment)[:MOST_SEGMENTS]:
            edges = time[max(first - 1, 0)], time[last]
            axes.axvspan(*edges, facecolor="#9ca3af", alpha=0.35, linewidth=0.0, label=label, zorder=0)
            label = None
    axes.set_yscale("log")
    largest = max(float(course.error.max()), result.tolerance)
    axes.set_ylim(largest * 1e-6, largest * 3.0)
    finish(axes, f"time [{clock.name}]", "error / peak [-]")


def _runs(labels: Sequence[str], name: str) -> list[tuple[int, int]]:
    """First and last row of each run of a segment; in a cycle its label carries a number."""
    found = []
    for label, group in itertools.groupby(enumerate(labels), key=lambda row: row[1]):
        if label == name or label.startswith(f"{name} ("):
            rows = [k for k, _ in group]
            found.append((rows[0], rows[-1]))
    return found
