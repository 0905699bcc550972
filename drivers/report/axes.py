"""What all pictures share: size, lines that differ in black and white, labels, legends."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter

from drivers.history import History
from matlib.arrays import FloatArray
from matlib.units import TIME, Unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.axis import Axis

__all__ = [
    "BAND",
    "FIRST",
    "INK",
    "LIMIT",
    "SECOND",
    "THIRD",
    "TICK",
    "draw_line",
    "finish",
    "label_lines",
    "log_times",
    "short_name",
    "small_figure",
    "time_unit",
]

# Told apart in black and white by their dashes, and by people who see few colours by their lightness.
INK = "#1b3a5c"
FIRST: dict[str, Any] = {"color": INK, "linestyle": "-", "linewidth": 1.6}
SECOND: dict[str, Any] = {"color": "#c2570c", "linestyle": (0, (5, 2)), "linewidth": 1.6}
THIRD: dict[str, Any] = {"color": "#4b5563", "linestyle": "-", "linewidth": 1.3}
LIMIT: dict[str, Any] = {"color": "#111827", "linestyle": (0, (1, 1.5)), "linewidth": 1.3}
BAND: dict[str, Any] = {"facecolor": "#9ca3af", "alpha": 0.35, "linewidth": 0.0}

SIZE = (4.8, 3.4)  # inches: letters of 9 points are 9 pixels high where the picture is 380 wide
LABEL, TICK = 10, 9
FEW_DECADES = 1.6
LONGEST = 30
"""Letters of a name in a picture."""

MOST = 4000
"""Points of a line; a screen has fewer."""


def small_figure(width: float = SIZE[0], height: float = SIZE[1]) -> tuple[Figure, Axes]:
    """A figure with one pair of axes, for a page."""
    figure = Figure(figsize=(width, height), layout="constrained")
    return figure, figure.add_subplot()


def finish(axes: Axes, x: str, y: str, title: str = "") -> None:
    """Name the axes, with units, and give them the look of all pictures."""
    axes.set_xlabel(x, fontsize=LABEL)
    axes.set_ylabel(y, fontsize=LABEL)
    if title:
        axes.set_title(title, loc="left", fontsize=10, fontweight="bold", parse_math=False)
    axes.tick_params(labelsize=TICK)
    axes.xaxis.get_offset_text().set_fontsize(TICK)
    axes.yaxis.get_offset_text().set_fontsize(TICK)
    for axis in (axes.xaxis, axes.yaxis):
        if axis.get_scale() == "log":
            axis.set_minor_formatter(FuncFormatter(_minor_label(axis)))
    axes.grid(True, color="#d1d5db", linewidth=0.5)
    axes.set_axisbelow(True)
    axes.spines[["top", "right"]].set_visible(False)


def _minor_label(axis: Axis) -> Callable[[float, int | None], str]:
    """Names for the ticks between decades: at 2 and 5, and only where there are hardly any decades."""

    def name(value: float, _: int | None = None) -> str:
        low, high = sorted(axis.get_view_interval())
        exponent = math.floor(math.log10(value) + 1e-9)
        digit = round(value / 10.0**exponent)
        few = low > 0.0 and math.log10(high / low) < FEW_DECADES
        return rf"$\mathdefault{{{digit}\times10^{{{exponent}}}}}$" if few and digit in (2, 5) else ""

    return name


def label_lines(figure: Figure, columns: int = 3) -> None:
    """A legend above the axes, where it hides nothing; none where nothing has a name."""
    handles, labels = figure.axes[0].get_legend_handles_labels()
    if not handles:
        return
    legend = figure.legend(handles, labels, loc="outside upper left", ncols=columns, fontsize=TICK, frameon=False)
    for text in legend.get_texts():
        text.set_parse_math(False)


def draw_line(axes: Axes, x: FloatArray, y: FloatArray, **style: Any) -> None:
    """A line; of many points, the first, last, least and largest of each of `MOST` // 4 stretches, in their order."""
    if x.size > MOST:
        edges = np.linspace(0, x.size, MOST // 4 + 1).astype(np.int64)
        kept = {0, x.size - 1}
        for low, high in itertools.pairwise(edges.tolist()):
            kept |= {low, low + int(y[low:high].argmin()), low + int(y[low:high].argmax()), high - 1}
        rows = np.array(sorted(kept))
        x, y = x[rows], y[rows]
    axes.plot(x, y, **style)


def short_name(name: str) -> str:
    """A name as a picture has room for it."""
    return name if len(name) <= LONGEST else f"{name[: LONGEST - 3]}..."


def time_unit(duration: float) -> Unit:
    """The unit that suits a duration [s]."""
    for name in ("d", "h", "min"):
        if duration >= 2.0 * TIME[name].scale:
            return TIME[name]
    return TIME["s"]


def log_times(history: History) -> bool:
    """Whether a logarithmic time axis shows more: the first step lies decades below the whole."""
    times = history.time[history.time > 0.0]
    return times.size > 1 and math.log10(float(times[-1] / times[0])) > 5.0 and np.ptp(history.temperature) == 0.0
