"""The page of a study of increments."""

from __future__ import annotations

import math

from drivers.report.axes import label_lines, small_figure
from drivers.report.page import Fact, Origin, Page, Picture, picture
from drivers.report.parts import parts_of
from drivers.report.steps import steps_tables
from drivers.report.steps_plot import draw_course, draw_ladder
from drivers.report.tables import percent, place_text
from drivers.studies.ladder import RuleResult
from drivers.studies.steps import StepsResult
from drivers.subject import Subject

__all__ = ["steps_page"]


def steps_page(result: StepsResult, subject: Subject, origin: Origin) -> Page:
    """Verdict on the path's own increments, where their error arises, what is recommended, and every rule."""
    parts = parts_of(steps_tables(result, subject))
    kind = "estimated" if result.estimated else "guaranteed"
    basis = f"{result.basis}, {kind} to {percent(result.reference_bound)} of the peak"
    return Page(
        title=f"Increments of path {result.path.name} for {subject.name} ({subject.file}), judged on {basis}",
        holds=result.holds,
        verdict=parts.verdict,
        lead=parts.lead[1:],
        facts=_facts(result, subject),
        pictures=_pictures(result, subject),
        tables=parts.tables,
        origin=origin,
        settings={
            "Tolerance": f"{percent(result.tolerance)} of the path's peak",
            "Rule of the verdict": str(result.rule),
        },
    )


def _facts(result: StepsResult, subject: Subject) -> list[Fact]:
    own = result.own
    finite = own.relative < math.inf
    at = place_text(own.at, subject.temperature_unit)
    place = f"in {own.component} at {at}" if finite else f"in segment {own.at.segment}"
    facts = [
        Fact(
            label="Error of the path's own increments",
            value=percent(own.relative) if finite else "no finite response",
            against=f"{place}; tolerance {percent(result.tolerance)}",
        ),
        Fact(label="Own increments", value=str(result.path.increment_count), against=str(result.rule)),
    ]
    if result.recommended is not None:
        error = f"error {percent(result.recommended.relative_error)} when run"
        facts.append(Fact(label="Recommended", value=f"{result.recommended.increments} increments", against=error))
    if result.blame is not None:
        share = f"{percent(result.blame.share)} of the peak by itself"
        facts.append(Fact(label="Error comes from", value=f"segment {result.blame.segment}", against=share))
    return facts


def _pictures(result: StepsResult, subject: Subject) -> list[Picture]:
    pictures = [_course(result, subject)] if result.own.relative < math.inf else []
    recursions = list(dict.fromkeys([result.rule.recursion, *(rule.rule.recursion for rule in result.rules)]))
    for recursion in recursions:
        rules = [rule for rule in result.rules if rule.rule.recursion == recursion]
        if rules:
            pictures.append(_ladder(result, recursion, rules))
    return pictures


def _course(result: StepsResult, subject: Subject) -> Picture:
    figure, axes = small_figure()
    draw_course(axes, result)
    label_lines(figure, 2)
    own, blame = result.own, result.blame
    finding = f"Largest, {percent(own.relative)}, at {place_text(own.at, subject.temperature_unit)}."
    if blame is not None:
        finding += f" Segment {blame.segment} (grey) makes {'most' if blame.most else 'the largest part'} of it."
    return picture(figure, "Error of the own increments over the path", finding)


def _ladder(result: StepsResult, recursion: str, rules: list[RuleResult]) -> Picture:
    figure, axes = small_figure(height=3.8)
    draw_ladder(axes, result, rules)
    label_lines(figure)
    known = [(rule.increments_needed, rule.rule.shift_rule) for rule in rules if rule.increments_needed is not None]
    finding = f"No rule of these was seen to stay within {percent(result.tolerance)}."
    if known:
        fewest, name = min(known)
        finding = f"Fewest increments for {percent(result.tolerance)}: {fewest}, shift rule {name}."
    return picture(figure, f"Error against increments, {recursion}", f"{finding} Beside each name: the observed order.")
