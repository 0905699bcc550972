"""A card before and after, as a picture."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure

from drivers.report.axes import BAND, FIRST, INK, SECOND, THIRD, finish, short_name, time_unit
from drivers.report.baseline import Verified
from drivers.report.response_plot import Shown, main_component, scale_time
from drivers.studies.baseline import PathVerdict
from drivers.studies.spread import LEVEL, PathScatter
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.units import Unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["draw_before_after", "draw_change", "draw_ratios", "verified_figure"]

SCATTER: dict[str, Any] = {"facecolor": "none", "edgecolor": "#6b7280", "hatch": "....", "linewidth": 0.4}
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
    stress = verified.card.stress_unit
    draw_before_after(upper, worst, stress, scatter, f"path that moved most: {worst.name}")
    upper.legend(frameon=False)
    upper.set_xlabel("")
    draw_change(lower, worst, stress, "change, now - recorded")
    draw_ratios(right, verified.verification.paths, "all paths")
    verdict = "behaves as accepted" if verified.holds else "does not behave as accepted"
    names = f"recorded (solid): {verified.baseline.card_name}\nnow (dashed): {verified.card.name}"
    figure.suptitle(f"{verdict}\n{names}", fontsize=10, x=0.01, ha="left", parse_math=False)
    return figure


def shown_of_verdict(path: PathVerdict, stress_unit: Unit) -> Shown:
    """The component of the largest change; where nothing has changed, that of the largest stress."""
    then, difference = path.recorded.response, path.difference
    clock = time_unit(float(then.time[-1]))
    if difference is None or difference.value == 0.0:
        return Shown(is_stress=True, component=main_component(then), stress_unit=stress_unit, clock=clock)
    names = STRESS_COMPONENTS if difference.quantity == "stress" else STRAIN_COMPONENTS
    component = names.index(difference.component)
    return Shown(is_stress=names is STRESS_COMPONENTS, component=component, stress_unit=stress_unit, clock=clock)


def _width(path: PathVerdict, shown: Shown) -> float:
    """Half-width of what is accepted, in the unit of what is shown."""
    then = path.recorded.response
    peak = float(np.abs(then.stress_components if shown.is_stress else then.strain_components).max())
    return path.tolerance * (float(shown.stress_unit.from_si(peak)) if shown.is_stress else peak)


def draw_before_after(
    axes: Axes, path: PathVerdict, stress_unit: Unit, scatter: PathScatter | None = None, title: str = ""
) -> None:
    """Recorded and present response to a path, with the tolerance band and the scatter of the calibration."""
    shown, then = shown_of_verdict(path, stress_unit), path.recorded.response
    before, width = shown.values(then), _width(path, shown)
    axes.fill_between(shown.time(then), before - width, before + width, label="accepted", **BAND)
    if scatter is not None and shown.is_stress:
        low, high = (stress_unit.from_si(edge[:, shown.component]) for edge in (scatter.low, scatter.high))
        label = f"scatter, {100.0 * LEVEL:g} %"
        axes.fill_between(shown.time(scatter.centre), np.asarray(low), np.asarray(high), label=label, **SCATTER)
    axes.plot(shown.time(then), before, label="recorded", **FIRST)
    if path.now is not None:
        axes.plot(shown.time(path.now), shown.values(path.now), label="now", **SECOND)
    scale_time(axes, then)
    finish(axes, f"time [{shown.clock.name}]", shown.label, title)


def draw_change(axes: Axes, path: PathVerdict, stress_unit: Unit, title: str = "") -> None:
    """Present response minus the recorded one, with the tolerance band."""
    shown, then = shown_of_verdict(path, stress_unit), path.recorded.response
    width = _width(path, shown)
    axes.axhspan(-width, width, label="accepted", **BAND)
    if path.now is not None:
        axes.plot(shown.time(then), shown.values(path.now) - shown.values(then), label="now - recorded", **THIRD)
    scale_time(axes, then)
    finish(axes, f"time [{shown.clock.name}]", f"change, {shown.label}", title)


def draw_ratios(axes: Axes, paths: tuple[PathVerdict, ...], title: str = "") -> None:
    """Change of every path in units of its tolerance; without an answer, a cross."""
    ordered = sorted(paths, key=lambda path: path.ratio)
    for k, path in enumerate(ordered):
        color = INK if path.holds else SECOND["color"]
        if path.difference is None:
            axes.plot([1.0], [k], marker="x", color=color)
        else:
            axes.plot([max(path.ratio, LEAST_RATIO)], [k], marker="o" if path.holds else "s", color=color, linestyle="")
    axes.axvline(1.0, color="black", linewidth=0.8)
    axes.set_xscale("log")
    axes.set_yticks(range(len(ordered)), [short_name(path.name) for path in ordered], parse_math=False)
    finish(axes, "change in units of the tolerance [-]", "", title)
