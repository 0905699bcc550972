"""Shift laws over temperature, and how far two of them are apart."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from drivers.report.axes import BAND, FIRST, LIMIT, THIRD, finish
from matlib.arrays import FloatArray
from matlib.card import Card
from matlib.errors import ShiftRangeError
from matlib.shift import ShiftLaw
from matlib.units import Unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["LawLine", "Span", "common_span", "draw_laws", "draw_laws_apart", "log10_shift", "span_of"]

POINTS = 300
MOST_LIMITS = 6.0
NEAR = 0.6
"""A pole is shown where it lies within this part of the range below it."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LawLine:
    """A law as a line of a picture."""

    name: str
    law: ShiftLaw
    style: dict[str, Any]


@dataclass(frozen=True, slots=True, kw_only=True)
class Span:
    """Temperatures [K] that a picture of shift laws is about.

    Parameters
    ----------
    drawn : tuple of float
        Lowest and highest temperature of interest.
    common : float
        Where all laws are taken as 1.
    unit : Unit
        To show temperatures in.
    service, measured : tuple of float, optional
        Shaded.
    """

    drawn: tuple[float, float]
    common: float
    unit: Unit
    service: tuple[float, float] | None = None
    measured: tuple[float, float] | None = None


def span_of(card: Card, law: ShiftLaw) -> Span:
    """What a card says of the temperatures of its law: service and measured range, else 20 K about T_ref."""
    unit, service = card.temperature_unit, card.service_temperature
    measured = None
    if card.limits.measured is not None:
        low, high = (unit.to_si(T) for T in card.limits.measured)
        measured = (low, high)
    known = [window for window in (service, measured) if window is not None]
    low = min((window[0] for window in known), default=law.T_ref - 20.0)
    high = max((window[1] for window in known), default=law.T_ref + 20.0)
    if low == high:
        low, high = low - 10.0, high + 10.0
    common = min(max(law.T_ref, low), high)
    return Span(drawn=(low, high), common=common, unit=unit, service=service, measured=measured)


def common_span(a: Card, b: Card) -> Span:
    """That of the first card, unless only the second states its service; in the first one's unit, both 1 near its T_ref."""
    chosen = b if a.service_temperature is None and b.service_temperature is not None else a
    span = span_of(chosen, chosen.shift())
    common = min(max(a.shift().T_ref, span.drawn[0]), span.drawn[1])
    return replace(span, common=common, unit=a.temperature_unit)


def log10_shift(law: ShiftLaw, T: FloatArray, T_common: float) -> FloatArray:
    """log10 of the shift factor, 0 at `T_common`; not a number where the law has no answer."""
    values = np.full(T.shape, np.nan)
    try:
        zero = float(law.ln_shift(T_common))
    except ShiftRangeError:
        return values
    for k, temperature in enumerate(T.tolist()):
        try:
            values[k] = (float(law.ln_shift(temperature)) - zero) / math.log(10.0)
        except ShiftRangeError:
            continue
    return values


def draw_laws(axes: Axes, lines: Sequence[LawLine], span: Span, title: str = "") -> None:
    """Laws over temperature, with the service window and the measured range shaded and poles marked."""
    low, high = span.drawn
    width = high - low
    poles = {line.name: line.law.pole for line in lines}
    shown = {name: round(T, 6) for name, T in poles.items() if T is not None and low - NEAR * width < T < high}
    left = min([low, *shown.values()]) - 0.04 * width
    T = np.linspace(left, high + 0.04 * width, POINTS)
    inside = (low <= T) & (high >= T)
    sizes = []
    for line in lines:
        values = log10_shift(line.law, T, span.common)
        axes.plot(span.unit.from_si(T), values, label=line.name, **line.style)
        sizes += values[inside & np.isfinite(values)].tolist()
    _shade(axes, span)
    for pole in sorted(set(shown.values())):
        names = " and ".join(name for name, at in shown.items() if at == pole)
        label = f"pole of {names}" if len(lines) > 1 else "pole"
        axes.axvline(span.unit.from_si(pole), label=label, **LIMIT)
    if shown:
        below = (span.unit.from_si(left), span.unit.from_si(max(shown.values())))
        axes.axvspan(*below, facecolor="none", edgecolor="#9ca3af", hatch="xxx", linewidth=0.0, zorder=0)
    if sizes:
        room = 0.08 * (max(sizes) - min(sizes)) or 1.0
        axes.set_ylim(min(sizes) - room, max(sizes) + room)
    at = f"{span.unit.from_si(span.common):.4g} {span.unit.name}"
    finish(axes, f"temperature [{span.unit.name}]", f"log10 a_T [-], 0 at {at}", title)


def _shade(axes: Axes, span: Span) -> None:
    """Service window in grey; measured range hatched, at the foot of the axes."""
    if span.service is not None:
        axes.axvspan(*(span.unit.from_si(T) for T in span.service), label="service window", zorder=0, **BAND)
    if span.measured is not None:
        low, high = (span.unit.from_si(T) for T in span.measured)
        axes.axvspan(
            low, high, ymax=0.05, facecolor="white", edgecolor="#374151", hatch="////", linewidth=0.6, label="measured"
        )


def draw_laws_apart(axes: Axes, first: LawLine, second: LawLine, span: Span, limit: float | None = None) -> None:
    """Second law minus the first in decades, over temperature."""
    low, high = span.drawn
    T = np.linspace(low, high, POINTS)
    apart = log10_shift(second.law, T, span.common) - log10_shift(first.law, T, span.common)
    axes.plot(span.unit.from_si(T), apart, label=f"{second.name} - {first.name}", **FIRST)
    axes.axhline(0.0, color=THIRD["color"], linewidth=0.8)
    if limit is not None and limit > 0.0:
        axes.axhline(limit, label="largest in the fitted range", **LIMIT)
        axes.axhline(-limit, **LIMIT)
        if np.abs(apart).max() > MOST_LIMITS * limit:  # far outside the range; what the limit is about is to be seen
            axes.set_ylim(-MOST_LIMITS * limit, MOST_LIMITS * limit)
    _shade(axes, span)
    finish(axes, f"temperature [{span.unit.name}]", "difference of log10 a_T [decades]")
