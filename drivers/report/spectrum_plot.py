"""Relaxation moduli: the terms of a card against its service, and master curves."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from drivers.report.axes import FIRST, SECOND, TICK, finish
from matlib.card import Card
from matlib.errors import ShiftRangeError
from matlib.material import Material

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["Curve", "decade_text", "draw_master_curves", "draw_spectrum", "reduced_window"]

BEYOND = 4.0
"""Decades that are drawn beyond the terms; what reaches further ends in an arrow."""

POINTS = 250
THIN: dict[str, Any] = {"linewidth": 1.0, "marker": "o", "markersize": 3.5, "markevery": 25}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Curve:
    """A material as a line of a picture."""

    name: str
    material: Material
    style: dict[str, Any]


def reduced_window(card: Card, material: Material, T: float) -> tuple[float, float] | None:
    """log10 of the shortest and longest reduced time [s at T_ref] that service at `T` [K] asks for; None where unknown."""
    if card.service_time is None:
        return None
    try:
        shift = float(material.shift.ln_shift(T)) / math.log(10.0)
    except ShiftRangeError:
        return None
    low, high = (math.log10(t) - shift for t in card.service_time)
    return low, high


def decade_text(log10_seconds: float) -> str:
    """A reduced time of any size, from its logarithm.

    Examples
    --------
    >>> decade_text(2.4), decade_text(-400.0)
    ('2.5e+02 s', '1e-400 s')
    """
    return f"{10.0**log10_seconds:.2g} s" if abs(log10_seconds) < 300.0 else f"1e{log10_seconds:.0f} s"


def draw_spectrum(axes: Axes, card: Card, material: Material) -> None:
    """Moduli of the terms at their relaxation times; bars for what the coldest and the hottest service asks for."""
    stress = card.stress_unit
    top = 0.0
    for name, series, style, marker in (
        ("shear terms", material.shear, FIRST, "o"),
        ("bulk terms", material.bulk, SECOND, "s"),
    ):
        if series.times.size == 0:
            continue
        moduli = np.asarray(stress.from_si(series.moduli))
        axes.vlines(np.log10(series.times), 0.0, moduli, color=style["color"], linewidth=1.4)
        axes.plot(np.log10(series.times), moduli, linestyle="", marker=marker, color=style["color"], label=name)
        top = max(top, float(moduli.max()))
    top = top or 1.0
    times = np.concatenate([material.shear.times, material.bulk.times])
    logs = np.log10(times) if times.size else np.zeros(1)
    left, right = float(logs.min()) - BEYOND, float(logs.max()) + BEYOND
    windows = _service(card, material)
    if windows:
        left = max(left, min(left + BEYOND - 1.0, *(window[0] for _, window in windows)))
        right = min(right, max(right - BEYOND + 1.0, *(window[1] for _, window in windows)))
    for k, (label, window) in enumerate(windows):
        _bar(axes, label, window, (left, right), (1.34 - 0.22 * k) * top)
    axes.set_ylim(0.0, (1.52 if windows else 1.1) * top)
    axes.set_xlim(left - 0.3, right + 0.3)
    T_ref = f"{card.temperature_unit.from_si(material.shift.T_ref):.4g} {card.temperature_unit.name}"
    finish(axes, f"log10 reduced time [s at {T_ref}]", f"modulus of a term [{stress.name}]")


def _service(card: Card, material: Material) -> list[tuple[str, tuple[float, float]]]:
    temperatures = card.service_temperature
    found = []
    for T in () if temperatures is None else dict.fromkeys(temperatures):
        window = reduced_window(card, material, T)
        if window is not None:
            found.append((f"service at {card.temperature_unit.from_si(T):.4g} {card.temperature_unit.name}", window))
    return found


def _bar(axes: Axes, label: str, window: tuple[float, float], shown: tuple[float, float], y: float) -> None:
    """A window as a bar with its name above; an arrow, and the numbers, where it goes on beyond the axes."""
    low, high = (min(max(x, shown[0]), shown[1]) for x in window)
    axes.plot([low, high], [y, y], color="#111827", linewidth=3.0, solid_capstyle="butt")
    below, above = window[1] < shown[0], window[0] > shown[1]
    for x, cut, marker, hidden in ((window[0], low, "<", above), (window[1], high, ">", below)):
        if not hidden:  # where all of it lies beyond one end, one arrow says so
            end = marker if cut != x else "|"
            axes.plot([cut], [y], marker=end, color="#111827", markersize=8, linestyle="", clip_on=False)
    right = 0.5 * (low + high) > 0.5 * (shown[0] + shown[1])
    cuts = low != window[0] or high != window[1]
    text = f"{label}: {decade_text(window[0])} to {decade_text(window[1])}" if cuts else label
    place = (shown[1] if right else shown[0], y)
    axes.annotate(
        text, place, textcoords="offset points", xytext=(0, 6), fontsize=TICK, ha="right" if right else "left"
    )


def draw_master_curves(axes: Axes, curves: Sequence[Curve], card: Card, T_common: float) -> None:
    """Shear and bulk relaxation moduli against reduced time, as seen at one temperature [K]."""
    shifts = {}
    for curve in curves:
        try:
            shifts[curve.name] = float(curve.material.shift.ln_shift(T_common)) / math.log(10.0)
        except ShiftRangeError:
            continue
    ends = [
        math.log10(tau) + shifts[curve.name]
        for curve in curves
        if curve.name in shifts
        for series in (curve.material.shear, curve.material.bulk)
        for tau in series.times.tolist()
    ]
    x = np.linspace(min(ends, default=0.0) - 1.5, max(ends, default=0.0) + 1.5, POINTS)
    for curve in curves:
        if curve.name not in shifts:
            continue
        xi = 10.0 ** np.clip(x - shifts[curve.name], -300.0, 300.0)
        for kind, series, more in (("G", curve.material.shear, {}), ("K", curve.material.bulk, THIN)):
            modulus = card.stress_unit.from_si(series.relaxation(xi))
            axes.plot(x, modulus, label=f"{kind} of {curve.name}", **(curve.style | more))
    axes.set_yscale("log")
    at = f"{card.temperature_unit.from_si(T_common):.4g} {card.temperature_unit.name}"
    finish(axes, f"log10 reduced time [s at {at}]", f"relaxation modulus [{card.stress_unit.name}]")
