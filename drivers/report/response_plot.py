"""Responses to a path over time, and what lies between two of them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from drivers.history import History
from drivers.path import Path
from drivers.report.axes import FIRST, INK, SECOND, THIRD, draw_line, finish, log_times, time_unit
from drivers.studies.compare import PathComparison
from matlib.arrays import FloatArray
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.units import Unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = [
    "Shown",
    "draw_answer",
    "draw_apart",
    "draw_loop",
    "draw_pair",
    "draw_stress",
    "draw_temperature",
    "main_component",
    "scale_time",
    "shown_of",
]


@dataclass(frozen=True, slots=True, kw_only=True)
class Shown:
    """What a picture shows of a history: stress or strain, which component, in which units."""

    is_stress: bool
    component: int
    stress_unit: Unit
    clock: Unit

    @property
    def label(self) -> str:
        """Name and unit of the quantity."""
        names = STRESS_COMPONENTS if self.is_stress else STRAIN_COMPONENTS
        return f"{names[self.component]} [{self.stress_unit.name if self.is_stress else '-'}]"

    def values(self, history: History) -> FloatArray:
        """The quantity, in its unit."""
        if self.is_stress:
            return np.asarray(self.stress_unit.from_si(history.stress_components[:, self.component]))
        return history.strain_components[:, self.component]

    def time(self, history: History) -> FloatArray:
        """Time in its unit."""
        return np.asarray(self.clock.from_si(history.time))


def main_component(history: History) -> int:
    """The component that carries the largest stress."""
    return int(np.abs(history.stress_components).max(axis=0).argmax())


def shown_of(result: PathComparison, stress_unit: Unit) -> Shown:
    """The component that differs most; where none does, that of the largest stress."""
    reference = result.first or result.second
    assert reference is not None
    difference = result.difference
    is_stress = difference is None or difference.quantity == "stress"
    if difference is None or difference.value == 0.0:
        component = main_component(reference)
    else:
        component = (STRESS_COMPONENTS if is_stress else STRAIN_COMPONENTS).index(difference.component)
    clock = time_unit(float(reference.time[-1]))
    return Shown(is_stress=is_stress, component=component, stress_unit=stress_unit, clock=clock)


def scale_time(axes: Axes, history: History, shown: Shown | None = None) -> None:
    """Logarithmic time where that shows more; a triangle on the axis is what a jump at time 0 leaves."""
    if not log_times(history):
        return
    axes.set_xscale("log")
    at_start = history.time == 0.0
    if shown is not None and at_start.sum() > 1:
        value = float(shown.values(history)[at_start][-1])
        mark = axes.plot([0.0], [value], marker="<", color=INK, markersize=7, linestyle="", label="after the jump")[0]
        mark.set_transform(axes.get_yaxis_transform())
        mark.set_clip_on(False)


def draw_pair(axes: Axes, result: PathComparison, stress_unit: Unit, title: str = "") -> None:
    """Both responses to one path, in the component that differs most."""
    reference = result.first or result.second
    if reference is None:
        axes.text(0.5, 0.5, "no response", ha="center", transform=axes.transAxes)
        finish(axes, "time", "stress", title)
        return
    shown = shown_of(result, stress_unit)
    for history, style, name in ((result.first, FIRST, "A"), (result.second, SECOND, "B")):
        if history is not None:
            draw_line(axes, shown.time(history), shown.values(history), label=name, **style)
    scale_time(axes, reference)
    finish(axes, f"time [{shown.clock.name}]", shown.label, title)


def draw_apart(axes: Axes, result: PathComparison, stress_unit: Unit, title: str = "") -> None:
    """Second response minus the first over time; nothing where one of them is missing."""
    first, second = result.first, result.second
    if first is None or second is None:
        return
    shown = shown_of(result, stress_unit)
    axes.axhline(0.0, color=THIRD["color"], linewidth=0.7)
    draw_line(axes, shown.time(first), shown.values(second) - shown.values(first), label="B - A", **THIRD)
    scale_time(axes, first)
    finish(axes, f"time [{shown.clock.name}]", f"B - A, {shown.label}", title)


def draw_stress(axes: Axes, history: History, stress_unit: Unit, title: str = "") -> None:
    """The largest stress component over time."""
    clock, component = time_unit(float(history.time[-1])), main_component(history)
    shown = Shown(is_stress=True, component=component, stress_unit=stress_unit, clock=clock)
    draw_line(axes, shown.time(history), shown.values(history), **FIRST)
    scale_time(axes, history, shown)
    finish(axes, f"time [{clock.name}]", shown.label, title)


def draw_answer(axes: Axes, history: History, path: Path, stress_unit: Unit) -> None:
    """What a path asks for: stress over time, or the strain that changes most where stresses drive it."""
    driven = list(path.mode.driven)
    if not driven or not path.segments[0].stress_controlled[driven[0]]:
        draw_stress(axes, history, stress_unit)
        return
    clock, component = time_unit(float(history.time[-1])), int(np.ptp(history.strain_components, axis=0).argmax())
    shown = Shown(is_stress=False, component=component, stress_unit=stress_unit, clock=clock)
    draw_line(axes, shown.time(history), shown.values(history), **FIRST)
    scale_time(axes, history, shown)
    finish(axes, f"time [{clock.name}]", shown.label)


def draw_temperature(axes: Axes, history: History, unit: Unit, title: str = "") -> None:
    """Temperature over time."""
    clock = time_unit(float(history.time[-1]))
    draw_line(axes, np.asarray(clock.from_si(history.time)), np.asarray(unit.from_si(history.temperature)), **FIRST)
    scale_time(axes, history)
    finish(axes, f"time [{clock.name}]", f"temperature [{unit.name}]", title)


def draw_loop(axes: Axes, history: History, stress_unit: Unit, title: str = "") -> None:
    """The largest stress component against the strain along it, or against the strain that changes most."""
    component = main_component(history)
    values = np.asarray(stress_unit.from_si(history.stress_components[:, component]))
    strains = history.strain_components
    across = component if np.ptp(strains[:, component]) > 0.0 else int(np.ptp(strains, axis=0).argmax())
    draw_line(axes, strains[:, across], values, **FIRST)
    finish(axes, f"{STRAIN_COMPONENTS[across]} [-]", f"{STRESS_COMPONENTS[component]} [{stress_unit.name}]", title)
    axes.ticklabel_format(axis="x", style="sci", scilimits=(-2, 3))
