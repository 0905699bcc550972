"""The page of a response to a path."""

from __future__ import annotations

from drivers.history import History
from drivers.path import Path
from drivers.report.axes import label_lines, small_figure
from drivers.report.page import Fact, Origin, Page, picture
from drivers.report.parts import parts_of
from drivers.report.response_plot import draw_loop, draw_stress, draw_temperature
from drivers.report.tables import history_tables, temperature_text, time_text
from drivers.subject import Subject

__all__ = ["drive_page"]


def drive_page(history: History, subject: Subject, path: Path, method: str, origin: Origin) -> Page:
    """Stress and temperature over time, the loop, and the rows at the ends of segments.

    Parameters
    ----------
    history : History
    subject : Card or RoutineFile
    path : Path
    method : str
        How the response was computed, in words.
    origin : Origin
    """
    stress, temperature = subject.stress_unit, subject.temperature_unit
    peak = f"{stress.from_si(history.peak_stress):.5g} {stress.name}"
    low, high = (temperature_text(T, temperature) for T in path.temperature_range)
    last = len(history) - 1
    at_end = f"{stress.from_si(float(abs(history.stress_components[last]).max())):.5g} {stress.name}"
    facts = [
        Fact(label="Peak stress", value=peak, against="largest magnitude of a component, over all increments"),
        Fact(label="Largest stress at the end", value=at_end, against=f"after {time_text(path.duration)}"),
        Fact(label="Temperature", value=f"{low} to {high}"),
        Fact(label="Increments", value=str(path.increment_count), against=method),
    ]
    pictures = []
    for draw, title, finding in (
        (lambda axes: draw_stress(axes, history, stress), "Stress over time", f"Peak {peak}."),
        (lambda axes: draw_temperature(axes, history, temperature), "Temperature over time", f"From {low} to {high}."),
        (lambda axes: draw_loop(axes, history, stress), "Stress against strain", f"Peak {peak}."),
    ):
        figure, axes = small_figure()
        draw(axes)
        label_lines(figure)
        pictures.append(picture(figure, title, finding))
    tables = history_tables(history.at_segment_ends(), "At the ends of segments", stress, temperature)
    return Page(
        title=f"Response of {subject.name} ({subject.file}) to path {path.name} ({path.mode.name})",
        holds=None,
        verdict=f"{subject.name} on {path.name}: peak stress {peak} ({method})",
        facts=facts,
        pictures=pictures,
        tables=parts_of(tables).tables,
        origin=origin,
    )
