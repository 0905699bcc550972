"""Results as pictures."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure

from drivers.history import History
from drivers.path import Path
from drivers.studies.compare import Comparison, PathComparison
from drivers.subject import Subject
from matlib.arrays import FloatArray
from matlib.card import Card
from matlib.errors import ShiftRangeError
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.units import TIME, Unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["comparison_figure", "drive_figure"]

# Told apart in black and white by their dashes, and by people who see few colours by their lightness.
FIRST: dict[str, Any] = {"color": "#1b3a5c", "linestyle": "-", "linewidth": 1.6}
SECOND: dict[str, Any] = {"color": "#d97706", "linestyle": (0, (5, 2)), "linewidth": 1.6}
THIRD: dict[str, Any] = {"color": "#6b7280", "linestyle": (0, (1, 1.5)), "linewidth": 1.4}


def _figure(width: float, height: float) -> Figure:
    return Figure(figsize=(width, height), layout="constrained")


def _finish(axes: Axes, x: str, y: str, title: str) -> None:
    axes.set_xlabel(x)
    axes.set_ylabel(y)
    axes.set_title(title, loc="left", fontsize=10, fontweight="bold")
    axes.grid(True, color="#d1d5db", linewidth=0.5)
    axes.spines[["top", "right"]].set_visible(False)


def _time_unit(duration: float) -> Unit:
    for name in ("d", "h", "min"):
        if duration >= 2.0 * TIME[name].scale:
            return TIME[name]
    return TIME["s"]


def _main_component(history: History) -> int:
    """The component that carries the largest stress."""
    return int(np.abs(history.stress_components).max(axis=0).argmax())


def _log_times(history: History) -> bool:
    """Whether a logarithmic time axis shows more: the first step lies decades below the whole."""
    times = history.time[history.time > 0.0]
    return times.size > 1 and math.log10(float(times[-1] / times[0])) > 5.0 and np.ptp(history.temperature) == 0.0


def drive_figure(history: History, card: Subject, path: Path) -> Figure:
    """Stress and temperature against time; stress against strain.

    Parameters
    ----------
    history : History
    card : Card or RoutineFile
        Gives the units.
    path : Path

    Returns
    -------
    Figure
    """
    figure = _figure(9.0, 6.0)
    grid = figure.add_gridspec(2, 2, width_ratios=(3, 2))
    upper, lower, right = (
        figure.add_subplot(grid[0, 0]),
        figure.add_subplot(grid[1, 0]),
        figure.add_subplot(grid[:, 1]),
    )
    lower.sharex(upper)
    unit, stress, component = _time_unit(path.duration), card.stress_unit, _main_component(history)
    time = unit.from_si(history.time)
    label = f"{STRESS_COMPONENTS[component]} [{stress.name}]"
    values = stress.from_si(history.stress_components[:, component])
    upper.plot(time, values, **FIRST)
    _finish(upper, "", label, "stress")
    lower.plot(time, card.temperature_unit.from_si(history.temperature), color=SECOND["color"])
    _finish(lower, f"time [{unit.name}]", f"temperature [{card.temperature_unit.name}]", "temperature")
    if _log_times(history):
        upper.set_xscale("log")
    upper.tick_params(labelbottom=False)
    strains = history.strain_components
    across = component if np.ptp(strains[:, component]) > 0.0 else int(np.ptp(strains, axis=0).argmax())
    right.plot(strains[:, across], values, **FIRST)
    _finish(right, f"{STRAIN_COMPONENTS[across]} [-]", label, "stress against strain")
    right.ticklabel_format(axis="x", style="sci", scilimits=(-2, 3))
    figure.suptitle(f"{card.name} on {path.name}", fontsize=11, x=0.01, ha="left", parse_math=False)
    return figure


def comparison_figure(comparison: Comparison, a: Subject, b: Subject) -> Figure:
    """Both responses and their difference on the path that differs most, and the shift laws of two cards.

    Parameters
    ----------
    comparison : Comparison
    a, b : Card or RoutineFile

    Returns
    -------
    Figure
    """
    worst = comparison.worst
    figure = _figure(9.0, 6.5)
    grid = figure.add_gridspec(2, 2 if isinstance(a, Card) and isinstance(b, Card) else 1)
    upper, lower = figure.add_subplot(grid[0, 0]), figure.add_subplot(grid[1, 0])
    _draw_responses(upper, lower, worst, a)
    upper.set_title(f"worst path: {worst.path.name}", loc="left", fontsize=10, fontweight="bold", parse_math=False)
    if isinstance(a, Card) and isinstance(b, Card):  # a routine does not tell its shift law
        _draw_shift_laws(figure.add_subplot(grid[:, 1]), a, b)
    names = f"A (solid): {a.name}\nB (dashed): {b.name}"
    figure.suptitle(f"{comparison.same}\n{names}", fontsize=10, x=0.01, ha="left", parse_math=False)
    return figure


def _draw_responses(upper: Axes, lower: Axes, worst: PathComparison, card: Subject) -> None:
    first, second = worst.first, worst.second
    reference = first or second
    if reference is None:
        upper.text(0.5, 0.5, "no response", ha="center", transform=upper.transAxes)
        return
    quantity = "stress" if worst.difference is None else worst.difference.quantity
    names = STRESS_COMPONENTS if quantity == "stress" else STRAIN_COMPONENTS
    component = _main_component(reference) if worst.difference is None else names.index(worst.difference.component)
    unit = _time_unit(float(reference.time[-1]))

    def values(history: History) -> FloatArray:
        if quantity == "stress":
            return card.stress_unit.from_si(history.stress_components[:, component])
        return history.strain_components[:, component]

    of = card.stress_unit.name if quantity == "stress" else "-"
    label = f"{names[component]} [{of}]"
    for history, style, name in ((first, FIRST, "A"), (second, SECOND, "B")):
        if history is not None:
            upper.plot(unit.from_si(history.time), values(history), label=name, **style)
    upper.legend(frameon=False)
    _finish(upper, "", label, "")
    if first is not None and second is not None:
        lower.plot(unit.from_si(first.time), values(second) - values(first), **THIRD)
    _finish(lower, f"time [{unit.name}]", label, "difference, B - A")
    lower.sharex(upper)
    if _log_times(reference):
        upper.set_xscale("log")


def _draw_shift_laws(axes: Axes, a: Card, b: Card) -> None:
    window = a.service_temperature or b.service_temperature
    law_a, law_b = a.shift(), b.shift()
    if window is None:
        window = (law_a.T_ref - 20.0, law_a.T_ref + 20.0)
    T, unit = np.linspace(window[0], window[1], 400), a.temperature_unit
    T_common = min(max(law_a.T_ref, window[0]), window[1])
    for law, style, name in ((law_a, FIRST, "A"), (law_b, SECOND, "B")):
        try:
            log10_a = (law.ln_shift(T) - law.ln_shift(T_common)) / math.log(10.0)
        except ShiftRangeError:
            continue
        axes.plot(unit.from_si(T), log10_a, label=name, **style)
    measured = a.limits.measured
    if measured is not None:
        axes.axvspan(*measured, color="#e5e7eb", alpha=0.6, label="measured (A)", zorder=0)
    at = f"{unit.from_si(T_common):.4g} {unit.name}"
    _finish(axes, f"temperature [{unit.name}]", f"log10 a_T, 0 at {at} [-]", "shift laws")
    axes.legend(frameon=False)
