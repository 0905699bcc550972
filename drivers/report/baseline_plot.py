"""A card before and after, as a picture."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure

from drivers.history import History
from drivers.report.baseline import Verified
from drivers.report.plots import FIRST, SECOND, THIRD
from drivers.studies.baseline import PathVerdict
from drivers.studies.spread import LEVEL, PathScatter
from matlib.arrays import FloatArray
from matlib.card import Card
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.units import TIME, Unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["verified_figure"]

BAND: dict[str, Any] = {"color": "#9ca3af", "alpha": 0.35, "linewidth": 0.0}
SCATTER: dict[str, Any] = {"color": "#7c3aed", "alpha": 0.18, "linewidth": 0.0}
LEAST_RATIO = 1e-6
"""Changes below this part of a tolerance are drawn as this."""


def verified_figure(verified: Verified) -> Figure:
    """Recorded and present response with the tolerance band on the path that moved most; the change on every path.

    Parameters
    ----------
    verified : Verified

    Returns
    -------
    Figure
    """
    figure = Figure(figsize=(10.0, 6.5), layout="constrained")
    grid = figure.add_gridspec(2, 2, width_ratios=(3, 2))
    upper, lower = figure.add_subplot(grid[0, 0]), figure.add_subplot(grid[1, 0])
    right = figure.add_subplot(grid[:, 1])
    lower.sharex(upper)
    worst = verified.verification.worst
    scatter = None
    if verified.scatter is not None:
        scatter = next(path for path in verified.scatter.paths if path.verdict is worst)
    _draw_path(upper, lower, worst, verified.card, scatter)
    _draw_ratios(right, verified.verification.paths)
    verdict = "behaves as accepted" if verified.holds else "does not behave as accepted"
    names = f"recorded (solid): {verified.baseline.card_name}\nnow (dashed): {verified.card.name}"
    figure.suptitle(f"{verdict}\n{names}", fontsize=10, x=0.01, ha="left", parse_math=False)
    return figure


def _finish(axes: Axes, x: str, y: str, title: str) -> None:
    axes.set_xlabel(x)
    axes.set_ylabel(y)
    axes.set_title(title, loc="left", fontsize=10, fontweight="bold", parse_math=False)
    axes.grid(True, color="#d1d5db", linewidth=0.5)
    axes.spines[["top", "right"]].set_visible(False)


def _shown(path: PathVerdict) -> tuple[bool, int]:
    """Whether stress is shown rather than strain, and which component: that of the largest change, or of the largest stress."""
    if path.difference is None or path.difference.value == 0.0:
        return True, int(np.abs(path.recorded.response.stress_components).max(axis=0).argmax())
    if path.difference.quantity == "stress":
        return True, STRESS_COMPONENTS.index(path.difference.component)
    return False, STRAIN_COMPONENTS.index(path.difference.component)


def _draw_path(upper: Axes, lower: Axes, path: PathVerdict, card: Card, scatter: PathScatter | None) -> None:
    stress, component = _shown(path)
    then = path.recorded.response
    clock = _time_unit(float(then.time[-1]))
    name = STRESS_COMPONENTS[component] if stress else STRAIN_COMPONENTS[component]
    unit = card.stress_unit.name if stress else "-"

    def values(history: History) -> FloatArray:
        if stress:
            return card.stress_unit.from_si(history.stress_components[:, component])
        return history.strain_components[:, component]

    time, before = clock.from_si(then.time), values(then)
    every = then.stress_components if stress else then.strain_components
    peak = float(np.abs(every).max())
    width = path.tolerance * (card.stress_unit.from_si(peak) if stress else peak)
    upper.fill_between(time, before - width, before + width, label="accepted", **BAND)
    if scatter is not None and stress:
        low, high = (card.stress_unit.from_si(edge[:, component]) for edge in (scatter.low, scatter.high))
        label = f"scatter, {100.0 * LEVEL:g} %"
        upper.fill_between(clock.from_si(scatter.centre.time), low, high, label=label, **SCATTER)
    upper.plot(time, before, label="recorded", **FIRST)
    lower.axhspan(-width, width, **BAND)
    if path.now is not None:
        after = values(path.now)
        upper.plot(time, after, label="now", **SECOND)
        lower.plot(time, after - before, **THIRD)
    upper.legend(frameon=False)
    _finish(upper, "", f"{name} [{unit}]", f"path that moved most: {path.name}")
    _finish(lower, f"time [{clock.name}]", f"{name} [{unit}]", "change, now - recorded")
    positive = then.time[then.time > 0.0]
    if positive.size > 1 and math.log10(float(positive[-1] / positive[0])) > 5.0 and np.ptp(then.temperature) == 0.0:
        upper.set_xscale("log")


def _time_unit(duration: float) -> Unit:
    for name in ("d", "h", "min"):
        if duration >= 2.0 * TIME[name].scale:
            return TIME[name]
    return TIME["s"]


def _draw_ratios(axes: Axes, paths: tuple[PathVerdict, ...]) -> None:
    """Change of every path in units of its tolerance; without an answer, a cross."""
    ordered = sorted(paths, key=lambda path: path.ratio)
    for k, path in enumerate(ordered):
        color = FIRST["color"] if path.holds else SECOND["color"]
        if path.difference is None:
            axes.plot([1.0], [k], marker="x", color=color)
        else:
            axes.plot([max(path.ratio, LEAST_RATIO)], [k], marker="o" if path.holds else "s", color=color, linestyle="")
    axes.axvline(1.0, color="black", linewidth=0.8)
    axes.set_xscale("log")
    axes.set_yticks(range(len(ordered)), [path.name for path in ordered], fontsize=7, parse_math=False)
    _finish(axes, "change in units of the tolerance [-]", "", "all paths")
