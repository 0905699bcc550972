"""The pictures of the README, made by the tool from the files of the demonstration: ``python -m tests.pictures``."""

from __future__ import annotations

import sys
from importlib import resources
from pathlib import Path

from matplotlib.figure import Figure

from drivers.battery import battery, card_window
from drivers.commands.output import save_figure
from drivers.path_file import read_path
from drivers.report.axes import FIRST, SECOND, label_lines, small_figure
from drivers.report.response_plot import draw_pair
from drivers.report.shift_plot import LawLine, common_span, draw_laws
from drivers.report.spectrum_plot import draw_spectrum
from drivers.report.steps_plot import draw_ladder
from drivers.studies.compare import compare
from drivers.studies.steps import Rule, steps
from matlib.card import Card, read_card

FOLDER = Path(__file__).parents[1] / "drivers" / "demo" / "pictures"
DEMO = resources.files("drivers.demo")


def spectrum(laboratory: Card) -> Figure:
    figure, axes = small_figure()
    draw_spectrum(axes, laboratory, laboratory.material())
    label_lines(figure)
    return figure


def laws(laboratory: Card, slip: Card) -> Figure:
    figure, axes = small_figure()
    lines = (
        LawLine(name="laboratory", law=laboratory.shift(), style=FIRST),
        LawLine(name="slip", law=slip.shift(), style=SECOND),
    )
    draw_laws(axes, lines, common_span(laboratory, slip))
    label_lines(figure, 2)
    return figure


def pull(laboratory: Card, slip: Card) -> Figure:
    material = laboratory.material()
    window = card_window(laboratory, material)
    path = next(path for path in battery(material, window) if path.name == "pull of 4 s, 110 degC")
    comparison = compare(material, slip.material(), [path], tolerance=0.01, temperatures=window.temperature)
    figure, axes = small_figure()
    draw_pair(axes, comparison.worst, laboratory.stress_unit)
    label_lines(figure)
    return figure


def increments(laboratory: Card) -> Figure:
    path = read_path(str(DEMO / "thermal-cycles.path.toml"))
    rules = [Rule(shift_rule=name, recursion="exponential") for name in ("start", "middle", "mean-rate", "integrated")]
    result = steps(laboratory.material(), path, tolerance=0.01, rule=rules[-1], rules=rules)
    figure, axes = small_figure(height=3.8)
    draw_ladder(axes, result, result.rules)
    label_lines(figure)
    return figure


def make(folder: Path) -> list[Path]:
    """Write every picture to a folder."""
    laboratory, slip = (read_card(str(DEMO / f"{name}.card.toml")) for name in ("laboratory", "slip"))
    figures = {
        "terms.png": spectrum(laboratory),
        "shift-laws.png": laws(laboratory, slip),
        "pull.png": pull(laboratory, slip),
        "increments.png": increments(laboratory),
    }
    folder.mkdir(parents=True, exist_ok=True)
    for name, figure in figures.items():
        save_figure(figure, str(folder / name))
    return [folder / name for name in figures]


if __name__ == "__main__":
    for file in make(Path(sys.argv[1]) if len(sys.argv) > 1 else FOLDER):
        print(file)
