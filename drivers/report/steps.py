"""The study of increments as table, plain data and picture."""

from __future__ import annotations

import math
from typing import Any

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from drivers.report.data import envelope, place_data, subject_data
from drivers.report.tables import percent, place_text, plain_table, time_text, verdict_line
from drivers.studies.ladder import RuleResult
from drivers.studies.steps import StepsResult
from drivers.subject import Subject

__all__ = ["steps_data", "steps_tables"]


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
            "relative_error": result.own.relative,
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
        blame=None
        if blame is None
        else {
            "segment": blame.segment,
            "share": blame.share,
            "cause": blame.cause,
            "decades": blame.decades,
            "ratio": blame.ratio,
            "sentence": blame.sentence,
        },
    )


def _rule_data(result: RuleResult) -> dict[str, Any]:
    return {
        "shift_rule": result.rule.shift_rule,
        "recursion": result.rule.recursion,
        "errors": [{"increments": rung.increments, "relative_error": rung.relative_error} for rung in result.errors],
        "order": result.order,
        "increments_needed": result.increments_needed,
    }


def steps_tables(result: StepsResult, card: Subject) -> list[RenderableType]:
    """Verdict, what the error comes from, recommended increments, and the ladder of every rule."""
    own, tolerance = result.own, percent(result.tolerance)
    at = place_text(own.at, card.temperature_unit)
    text = (
        f"the path's own {result.path.increment_count} increments ({result.rule}) are off by {percent(own.relative)} of the peak "
        f"{own.quantity} at most ({own.component} at {at}); the tolerance is {tolerance}"
    )
    kind = "estimated" if result.estimated else "guaranteed"
    bound = f"Judged on {result.basis}, {kind} to {percent(result.reference_bound)}."
    parts: list[RenderableType] = [verdict_line(result.holds, text), Text(bound)]
    if result.blame is not None:
        parts.append(Text(result.blame.sentence))
    parts.append(_advice_table(result, card))
    parts.append(_rules_table(result))
    return parts


def _advice_table(result: StepsResult, card: Subject) -> RenderableType:
    recommended = result.recommended
    if recommended is None:
        return Text(
            f"\nNo number of increments within the limit keeps {result.rule} within {percent(result.tolerance)}."
        )
    title = (
        f"\nRecommended for {result.rule}: {recommended.increments} increments in all, "
        f"error {percent(recommended.relative_error)} when run"
    )
    unit = card.temperature_unit
    columns = [
        ("segment", "left"),
        ("own", "right"),
        ("recommended", "right"),
        ("longest", "right"),
        ("temperature step", "right"),
    ]
    table = plain_table(title, columns)
    for advice, segment in zip(recommended.advice, result.path.segments, strict=True):
        step = unit.difference_from_si(advice.largest_temperature_change)
        table.add_row(
            advice.segment,
            str(segment.increments) if segment.duration > 0.0 else "1",
            str(advice.increments),
            time_text(advice.largest_increment),
            f"{step:.3g} {unit.name}" if step > 0.0 else "",
        )
    return table


def _rules_table(result: StepsResult) -> Table:
    title = f"\nIncrements that each rule needs for {percent(result.tolerance)}, the same number in every segment"
    columns = [
        ("shift rule", "left"),
        ("recursion", "left"),
        ("needed", "right"),
        ("order", "right"),
        ("most run", "right"),
        ("error then", "right"),
    ]
    table = plain_table(title, columns)
    for rule in sorted(result.rules, key=lambda r: r.increments_needed or math.inf):
        last = rule.errors[-1]
        table.add_row(
            rule.rule.shift_rule,
            rule.rule.recursion,
            "more" if rule.increments_needed is None else str(rule.increments_needed),
            "" if rule.order is None else f"{rule.order:.2f}",
            str(last.increments),
            percent(last.relative_error),
        )
    return table
