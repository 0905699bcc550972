"""Results as pictures of several axes, for ``--plot``."""

from __future__ import annotations

from matplotlib.figure import Figure

from drivers.history import History
from drivers.path import Path
from drivers.report.axes import FIRST, SECOND
from drivers.report.response_plot import draw_apart, draw_loop, draw_pair, draw_stress, draw_temperature
from drivers.report.shift_plot import LawLine, common_span, draw_laws
from drivers.report.tables import told_apart
from drivers.studies.compare import Comparison
from drivers.subject import Subject
from matlib.card import Card

__all__ = ["comparison_figure", "drive_figure"]


def drive_figure(history: History, subject: Subject, path: Path) -> Figure:
    """Stress and temperature against time; stress against strain.

    Parameters
    ----------
    history : History
    subject : Card or RoutineFile
        Gives the units.
    path : Path

    Returns
    -------
    Figure
    """
    figure = Figure(figsize=(9.0, 6.0), layout="constrained")
    grid = figure.add_gridspec(2, 2, width_ratios=(3, 2))
    upper, lower, right = (
        figure.add_subplot(grid[0, 0]),
        figure.add_subplot(grid[1, 0]),
        figure.add_subplot(grid[:, 1]),
    )
    lower.sharex(upper)
    draw_stress(upper, history, subject.stress_unit, "stress")
    draw_temperature(lower, history, subject.temperature_unit, "temperature")
    draw_loop(right, history, subject.stress_unit, "stress against strain")
    upper.set_xlabel("")
    upper.tick_params(labelbottom=False)
    figure.suptitle(f"{subject.name} on {path.name}", fontsize=11, x=0.01, ha="left", parse_math=False)
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
    figure = Figure(figsize=(9.0, 6.5), layout="constrained")
    grid = figure.add_gridspec(2, 2 if isinstance(a, Card) and isinstance(b, Card) else 1)
    upper, lower = figure.add_subplot(grid[0, 0]), figure.add_subplot(grid[1, 0])
    draw_pair(upper, worst, a.stress_unit, f"worst path: {worst.path.name}")
    if worst.first is not None or worst.second is not None:
        upper.legend(frameon=False)
        upper.set_xlabel("")
        lower.sharex(upper)
        draw_apart(lower, worst, a.stress_unit, "difference, B - A")
    if isinstance(a, Card) and isinstance(b, Card):  # a routine does not tell its shift law
        laws = LawLine(name="A", law=a.shift(), style=FIRST), LawLine(name="B", law=b.shift(), style=SECOND)
        right = figure.add_subplot(grid[:, 1])
        draw_laws(right, laws, common_span(a, b), "shift laws")
        right.legend(frameon=False)
    first, second = told_apart(a, b)
    names = f"A (solid): {first}\nB (dashed): {second}"
    figure.suptitle(f"{comparison.same}\n{names}", fontsize=10, x=0.01, ha="left", parse_math=False)
    return figure
