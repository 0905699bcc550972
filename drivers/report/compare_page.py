"""The page of a comparison."""

from __future__ import annotations

from collections.abc import Sequence

from drivers.report.axes import FIRST, SECOND, label_lines, small_figure
from drivers.report.constants import constants_table
from drivers.report.page import Fact, Origin, Page, Picture, picture
from drivers.report.parts import parts_of
from drivers.report.response_plot import draw_apart, draw_pair
from drivers.report.shift_plot import LawLine, common_span, draw_laws, draw_laws_apart
from drivers.report.spectrum_plot import Curve, draw_master_curves
from drivers.report.tables import (
    comparison_tables,
    percent,
    place_text,
    remaining_text,
    temperature_text,
)
from drivers.studies.compare import Comparison, PathComparison
from drivers.studies.slips import Slip
from drivers.subject import Subject
from matlib.card import Card

__all__ = ["card_pictures", "compare_page", "comparison_pictures"]

MORE_PATHS = 8
"""Paths besides the worst that are drawn, those that differ most."""


def compare_page(comparison: Comparison, a: Subject, b: Subject, slips: Sequence[Slip], origin: Origin) -> Page:
    """Verdict, likely slips, shift laws, moduli and responses of two cards; of routines, the responses."""
    parts = parts_of(comparison_tables(comparison, a, b, slips), ["Every path, the worst first"])
    count = len(comparison.paths)
    both = [constants_table({"A": a, "B": b})] if isinstance(a, Card) and isinstance(b, Card) else []
    return Page(
        title=f"Compared: A, {a.name} ({a.file}), with B, {b.name} ({b.file}), on {count} path{'s' if count > 1 else ''}",
        holds=comparison.holds,
        verdict=parts.verdict,
        lead=parts.lead,
        facts=_facts(comparison, a, slips),
        pictures=comparison_pictures(comparison, a, b),
        tables=[*parts.tables, *both],
        origin=origin,
        settings={"Tolerance": f"{percent(comparison.tolerance)} of each path's peak"},
    )


def _facts(comparison: Comparison, a: Subject, slips: Sequence[Slip]) -> list[Fact]:
    worst, shift = comparison.worst, comparison.shift
    facts = []
    if worst.difference is None:
        facts.append(Fact(label="Largest difference", value="no answer", against=worst.reason))
    else:
        against = f"of the peak {worst.difference.quantity}; tolerance {percent(comparison.tolerance)}"
        facts.append(Fact(label="Largest difference", value=percent(worst.difference.relative), against=against))
        where = place_text(worst.difference.at, a.temperature_unit)
        if worst.difference.value > 0.0:
            facts.append(
                Fact(label="On path", value=worst.path.name, against=f"{worst.difference.component} at {where}")
            )
    differing = sum(not path.holds for path in comparison.paths)
    facts.append(Fact(label="Paths that differ", value=str(differing), against=f"of {len(comparison.paths)}"))
    if shift.decades is not None and shift.temperature is not None:
        at = f"of a_T apart at most, at {temperature_text(shift.temperature, a.temperature_unit)}"
        facts.append(Fact(label="Shift laws", value=f"{shift.decades:.3g} decades", against=at))
    if slips:
        facts.append(Fact(label="Likely slip", value=slips[0].id, against=remaining_text(slips[0])))
    return facts


def comparison_pictures(comparison: Comparison, a: Subject, b: Subject) -> list[Picture]:
    """Laws, moduli, the worst path and its difference, and the other paths that differ."""
    worst = comparison.worst
    pictures = []
    if isinstance(a, Card) and isinstance(b, Card):
        pictures += card_pictures(a, b)
    pictures.append(_pair(worst, a, f"Worst path: {worst.path.name}"))
    if worst.first is not None and worst.second is not None:
        figure, axes = small_figure()
        draw_apart(axes, worst, a.stress_unit)
        pictures.append(picture(figure, f"Difference on {worst.path.name}", _finding(worst, a)))
    others = [
        path
        for path in comparison.paths
        if path is not worst and not path.identical and (path.relative is None or path.relative > 0.0)
    ]
    others.sort(key=lambda path: float("-inf") if path.relative is None else -path.relative)
    return [*pictures, *(_pair(path, a, path.path.name) for path in others[:MORE_PATHS])]


def card_pictures(a: Card, b: Card) -> list[Picture]:
    """Shift laws of two cards, their difference, and their master curves."""
    lines = LawLine(name="A", law=a.shift(), style=FIRST), LawLine(name="B", law=b.shift(), style=SECOND)
    span = common_span(a, b)
    low, high = (temperature_text(T, span.unit) for T in span.drawn)
    at = temperature_text(span.common, span.unit)
    figure, axes = small_figure()
    draw_laws(axes, lines, span)
    label_lines(figure)
    finding = f"Shift factor from {low} to {high}; both taken as 1 at {at}."
    pictures = [picture(figure, "Shift laws", finding)]
    figure, axes = small_figure()
    draw_laws_apart(axes, *lines, span)
    label_lines(figure)
    finding = f"B minus A in decades, from {low} to {high}; at 1 decade times differ tenfold."
    pictures.append(picture(figure, "Shift laws apart", finding))
    figure, axes = small_figure()
    curves = Curve(name="A", material=a.material(), style=FIRST), Curve(name="B", material=b.material(), style=SECOND)
    draw_master_curves(axes, curves, a, span.common)
    label_lines(figure, 2)
    finding = f"Shear modulus G and bulk modulus K (with discs) of both cards as seen at {at}."
    return [*pictures, picture(figure, "Relaxation moduli", finding)]


def _finding(result: PathComparison, subject: Subject) -> str:
    difference = result.difference
    if difference is None:
        return f"No answer: {result.reason}."
    if result.identical:
        return f"Identical to rounding: {percent(difference.relative)} of the peak at most."
    where = place_text(difference.at, subject.temperature_unit)
    verdict = "within the tolerance" if result.holds else "beyond the tolerance"
    size = f"{percent(difference.relative)} of the peak {difference.quantity} apart in {difference.component}"
    return f"{size}, {verdict}, at {where}."


def _pair(result: PathComparison, subject: Subject, title: str) -> Picture:
    figure, axes = small_figure()
    draw_pair(axes, result, subject.stress_unit)
    label_lines(figure)
    return picture(figure, title, _finding(result, subject))
