"""The study of increments as table, plain data and picture."""

from __future__ import annotations

import math
from typing import Any

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from drivers.report.data import envelope, place_data, subject_data
from drivers.report.tables import percent, place_text, plain_table, temperature_text, time_text, verdict_line
from drivers.studies.blame import Blame
from drivers.studies.ladder import RuleResult
from drivers.studies.runner import OWN, Rule
from drivers.studies.steps import StepsResult
from drivers.subject import Subject
from matlib.recursion import find_recursion
from matlib.units import Unit

__all__ = ["blame_sentence", "steps_data", "steps_tables"]

LARGE_RATIO = 5.0
ASSUMED = Rule()  # where none is named
"""Relaxation times in an increment from which a recursion without the right limit is near its wrong one."""


def steps_data(result: StepsResult, card: Subject) -> dict[str, Any]:
    """The study as plain data, SI units."""
    recommended = result.recommended
    blame = result.blame
    return envelope(
        "steps",
        result.holds,
        **subject_data(card),
        path=result.path.name,
        tolerance=result.tolerance,
        reference={"relative_bound": result.reference_bound, "estimated": result.estimated, "basis": result.basis},
        own={
            "shift_rule": result.rule.shift_rule,
            "recursion": result.rule.recursion,
            "increments": result.path.increment_count,
            "relative_error": result.own.relative if result.own.relative < math.inf else None,
            "quantity": result.own.quantity,
            "component": result.own.component,
            "at": place_data(result.own.at),
        },
        rules=[_rule_data(rule) for rule in result.rules],
        recommended=[]
        if recommended is None
        else [
            {
                "segment": advice.segment,
                "increments": advice.increments,
                "largest_increment": advice.largest_increment,
                "largest_temperature_change": advice.largest_temperature_change,
            }
            for advice in recommended.advice
        ],
        recommended_error=None if recommended is None else recommended.relative_error,
        recommended_total=None if recommended is None else recommended.increments,
        blame=None if blame is None else _blame_data(blame, card.temperature_unit),
    )


def _blame_data(blame: Blame, unit: Unit) -> dict[str, Any]:
    defect = blame.defect
    return {
        "segment": blame.segment,
        "share": blame.share,
        "cause": blame.cause,
        "temperature": None if defect is None else defect.temperature,
        "decades": None if defect is None else defect.decades,
        "ratio": None if defect is None else defect.ratio,
        "relaxation_time": None if defect is None else defect.relaxation_time,
        "sentence": blame_sentence(blame, unit),
    }


def _rule_data(result: RuleResult) -> dict[str, Any]:
    return {
        "shift_rule": result.rule.shift_rule,
        "recursion": result.rule.recursion,
        "errors": [{"increments": rung.increments, "relative_error": rung.relative_error} for rung in result.errors],
        "order": result.order,
        "increments_needed": result.increments_needed,
        "increments_each": result.each_needed,
    }


def steps_tables(result: StepsResult, card: Subject) -> list[RenderableType]:
    """Verdict, what the error comes from, recommended increments, and the ladder of every rule."""
    own, tolerance = result.own, percent(result.tolerance)
    at = place_text(own.at, card.temperature_unit)
    text = f"the path's own {result.path.increment_count} increments ({result.rule}) "
    if own.relative < math.inf:
        text += f"are off by {percent(own.relative)} of the peak {own.quantity} at most ({own.component} at {at})"
    else:
        text += f"have no finite response in segment {own.at.segment!r}, from {time_text(own.at.time)} on"
    text += f"; the tolerance is {tolerance}"
    if own.relative <= result.tolerance and not result.holds:
        text += f", and the bound on what this is judged on, {percent(result.own_bound)}, leaves it open"
    kind = "estimated" if result.estimated else "guaranteed"
    bound = f"Judged on {result.basis}, {kind} to {percent(result.reference_bound)}."
    parts: list[RenderableType] = [verdict_line(result.holds, text), Text(bound)]
    if result.blame is not None:
        parts.append(Text(blame_sentence(result.blame, card.temperature_unit)))
    if result.rule == ASSUMED:
        told = f"The rule is {ASSUMED}; where the simulation has another, name it with --shift-rule and --recursion."
        parts.append(Text(told))
    parts.append(_advice_table(result, card))
    parts.append(_rules_table(result))
    return parts


def blame_sentence(blame: Blame, unit: Unit) -> str:
    """Where the error comes from and why, in words."""
    defect, rule = blame.defect, blame.rule
    head = f"Segment {blame.segment!r} makes {'most' if blame.most else 'the largest part'} of the error"
    if defect is None:
        return f"{head}."
    if blame.cause == "free strain":
        return f"{head}: its free strains bend within an increment, and the update takes them as straight."
    near = f"{head}: near {temperature_text(defect.temperature, unit)}"
    drift = f"a_T changes by {defect.decades:.2g} decades"
    if blame.cause == "clock":
        return f"{near} {drift} over one increment, which shift rule {rule.shift_rule} does not follow."
    spans = (
        f"{near} one increment spans {defect.ratio:.2g} relaxation times (of {defect.relaxation_time:.2g} s at T_ref)"
    )
    if rule == OWN:
        return f"{spans}." if defect.decades == 0.0 else f"{spans} while {drift}."
    recursion = find_recursion(rule.recursion)
    if recursion.name == "exponential":
        return f"{spans} while {drift}, which exponential takes as steady."
    if not recursion.right_limit and defect.ratio >= LARGE_RATIO:
        return f"{spans}. With {recursion.name} {recursion.large_r.replace(': ', ', and ')}."
    return f"{spans}, which {recursion.name} does not follow."


def _advice_table(result: StepsResult, card: Subject) -> RenderableType:
    recommended = result.recommended
    if recommended is None:
        return Text(
            f"\nNothing up to {result.largest_run} increments keeps {result.rule} within {percent(result.tolerance)}. What follows a "
            'jump or a kink may do better with spacing = "log", or cut in two.'
        )
    title = f"\nRecommended for {result.rule}: {recommended.increments} increments, error {percent(recommended.relative_error)}"
    unit = card.temperature_unit
    columns = [
        ("segment", "left"),
        *((name, "right") for name in ("own", "recommended", "longest", "temperature step")),
    ]
    table = plain_table(title, columns)
    for advice, segment in zip(recommended.advice, result.path.segments, strict=True):
        step = unit.difference_from_si(advice.largest_temperature_change)
        moving, each = segment.duration > 0.0, " a piece" if segment.durations.size > 1 else ""
        table.add_row(
            advice.segment,
            f"{segment.increments}{each}" if moving else "jump",
            f"{advice.increments}{each}" if moving else "",
            time_text(advice.largest_increment) if moving else "",
            f"{step:.3g} {unit.name}" if step > 0.0 else "",
        )
    return table


def _rules_table(result: StepsResult) -> Table:
    title = f"\nIncrements needed for {percent(result.tolerance)}, the same in every segment"
    each = "each" if all(segment.durations.size == 1 for segment in result.path.segments) else "a piece"
    columns = [("shift rule", "left"), ("recursion", "left")]
    columns += [(name, "right") for name in ("in all", each, "order", "finest", "error there")]
    table = plain_table(title, columns)
    for rule in sorted(result.rules, key=lambda r: r.increments_needed or math.inf):
        last = rule.errors[-1]
        table.add_row(
            rule.rule.shift_rule,
            rule.rule.recursion,
            f"> {result.largest_run}" if rule.increments_needed is None else str(rule.increments_needed),
            "" if rule.each_needed is None else str(rule.each_needed),
            "" if rule.order is None else f"{rule.order:.2f}",
            str(last.increments),
            percent(last.relative_error),
        )
    return table
