"""The pages of baselines, recorded and verified."""

from __future__ import annotations

from drivers.baseline_file import Baseline
from drivers.report.axes import label_lines, small_figure
from drivers.report.baseline import Verified, recorded_tables, verdict_text, verified_tables
from drivers.report.baseline_plot import draw_before_after, draw_change, draw_ratios
from drivers.report.constants import constants_table
from drivers.report.page import Fact, Origin, Page, PageTable, Picture, picture
from drivers.report.parts import parts_of
from drivers.report.response_plot import draw_answer
from drivers.report.tables import percent, place_text, remaining_text
from drivers.studies.baseline import PathVerdict
from drivers.studies.spread import PathScatter
from matlib.card import Card
from matlib.errors import FileError

__all__ = ["recorded_page", "verified_page"]

MOST_PATHS = 8
ROW = 0.23  # inches


def verified_page(verified: Verified, origin: Origin) -> Page:
    """Verdict on a card, what moved, and its responses before and after."""
    captions = ["Every path, in units of its tolerance the worst first"]
    captions += ["Change against the scatter of the calibration"] if verified.scatter is not None else []
    parts = parts_of(verified_tables(verified), captions)
    baseline, card = verified.baseline, verified.card
    then = f"{baseline.card_name}, as recorded in {baseline.file} by version {baseline.version}"
    settings = {}
    if verified.scatter is not None:
        settings = {"Samples": str(verified.scatter.samples), "Seed": str(verified.scatter.seed)}
    return Page(
        title=f"Compared: {card.name} ({card.file}), with {then}, on {len(baseline.paths)} paths",
        holds=verified.holds,
        verdict=parts.verdict,
        lead=parts.lead,
        facts=_facts(verified),
        pictures=_pictures(verified),
        tables=[*parts.tables, _constants(verified)],
        origin=origin,
        settings=settings,
    )


def _constants(verified: Verified) -> PageTable:
    try:
        recorded = verified.baseline.card()
    except FileError:  # a plug-in law that is gone
        return constants_table({"now": verified.card})
    return constants_table({"recorded": recorded, "now": verified.card})


def _facts(verified: Verified) -> list[Fact]:
    worst, paths = verified.verification.worst, verified.verification.paths
    difference = worst.difference
    facts = [Fact(label="Worst path", value=worst.name, against=worst.reason)]
    if difference is not None:
        against = f"of the peak {difference.quantity} on {worst.name}; accepted {percent(worst.tolerance)}"
        facts = [Fact(label="Largest change", value=percent(difference.relative), against=against)]
        where = place_text(difference.at, verified.card.temperature_unit)
        if difference.value > 0.0:
            facts.append(Fact(label="At", value=where, against=f"in {difference.component}"))
    beyond = sum(not path.holds for path in paths)
    facts.append(Fact(label="Paths that moved", value=str(beyond), against=f"of {len(paths)}"))
    matter = [moved.part for moved in verified.moved if moved.matters]
    if matter:
        facts.append(Fact(label="What moved", value=", ".join(matter)))
    if verified.slips:
        facts.append(Fact(label="Likely slip", value=verified.slips[0].id, against=remaining_text(verified.slips[0])))
    if verified.scatter is not None:
        count = sum(path.exceeds for path in verified.scatter.paths)
        label = "Exceeds the calibration's scatter"
        facts.append(Fact(label=label, value=f"on {count} paths", against=f"of {len(paths)}"))
    return facts


def _pictures(verified: Verified) -> list[Picture]:
    paths = sorted(verified.verification.paths, key=lambda path: -path.ratio)
    figure, axes = small_figure(height=max(3.4, 1.2 + ROW * len(paths)))
    draw_ratios(axes, verified.verification.paths)
    beyond = sum(not path.holds for path in paths)
    finding = f"{beyond} of {len(paths)} paths fall short (squares): beyond the line at 1, which is a path's tolerance."
    pictures = [picture(figure, "Change of every path", finding)]
    scatters = {} if verified.scatter is None else {id(path.verdict): path for path in verified.scatter.paths}
    worst = paths[0]
    pictures.append(_before_after(verified, worst, f"Path that moved most: {worst.name}", scatters.get(id(worst))))
    if worst.now is not None:
        figure, axes = small_figure()
        draw_change(axes, worst, verified.card.stress_unit)
        label_lines(figure)
        pictures.append(picture(figure, f"Change on {worst.name}", _sentence(worst)))
    others = [path for path in paths[1:] if not path.holds][: MOST_PATHS - 1]
    return [*pictures, *(_before_after(verified, path, path.name, scatters.get(id(path))) for path in others)]


def _sentence(path: PathVerdict) -> str:
    text = verdict_text(path)
    return f"{text[0].upper()}{text[1:]}."


def _before_after(verified: Verified, path: PathVerdict, title: str, scatter: PathScatter | None) -> Picture:
    figure, axes = small_figure()
    draw_before_after(axes, path, verified.card.stress_unit, scatter)
    label_lines(figure)
    return picture(figure, title, _sentence(path))


def recorded_page(baseline: Baseline, card: Card, file: str, origin: Origin) -> Page:
    """What was recorded, path by path."""
    parts = parts_of(recorded_tables(baseline, card, file), ["Recorded paths"])
    pictures = []
    for recorded in baseline.paths[:MOST_PATHS]:
        figure, axes = small_figure()
        draw_answer(axes, recorded.response, recorded.path, card.stress_unit)
        label_lines(figure)
        peak = f"{card.stress_unit.from_si(recorded.response.peak_stress):.4g} {card.stress_unit.name}"
        finding = f"Peak stress {peak}; {percent(recorded.tolerance)} of the peak is accepted."
        pictures.append(picture(figure, recorded.path.name, finding))
    left = len(baseline.paths) - len(pictures)
    more = [f"Pictures of the first {len(pictures)} paths; {left} more are in the table."] if left else []
    return Page(
        title=f"Accepted behaviour of {card.name} ({card.file})",
        holds=None,
        verdict=parts.verdict,
        lead=[*parts.lead, *more],
        facts=[
            Fact(label="Paths", value=str(len(baseline.paths))),
            Fact(label="Probe points", value=str(sum(len(recorded.rows) for recorded in baseline.paths))),
        ],
        pictures=pictures,
        tables=[*parts.tables, constants_table({"recorded": card})],
        origin=origin,
    )
