"""Findings about the shift law of a card: its pole, its measured range, where it is not monotone."""

from __future__ import annotations

import math

import numpy as np

from matlib.card import Card
from matlib.errors import ShiftRangeError, both_scales
from matlib.finding import Finding, Severity
from matlib.material import Material
from matlib.shift import WLF, Crossover, MeasuredRange, Polynomial, ShiftLaw, Table

__all__ = ["law_findings", "measured_range_findings", "pole_findings"]

NEAR_POLE = 15.0
"""A service temperature closer to the pole than this [K] is worth a warning; common practice, no source."""

REFERENCE_TOLERANCE = 1e-3
"""Decades by which a table may miss log10 a_T = 0 at T_ref; a hundredth of what a master curve resolves."""


def _unwrapped(law: ShiftLaw) -> ShiftLaw:
    return law.law if isinstance(law, MeasuredRange) else law


def _used_parts(card: Card, law: ShiftLaw) -> list[tuple[ShiftLaw, float, float]]:
    """The simple laws inside a law, each with the temperatures [K] between which it is asked."""
    low, high = card.service_temperature or (0.0, math.inf)
    if isinstance(law, MeasuredRange):
        if law.outside != "extrapolate":
            low, high = max(low, law.low), min(high, law.high)
        law = law.law
    if isinstance(law, Crossover):
        return [(law.below, low, min(high, law.at)), (law.above, max(low, law.at), high)]
    return [(law, low, high)]


def law_findings(card: Card, material: Material) -> list[Finding]:
    """A table or a polynomial that is not monotone where it is used; a table that is not zero at T_ref."""
    findings = []
    for part, low, high in _used_parts(card, material.shift):
        if isinstance(part, Table):
            used = (part.T[1:] > low) & (part.T[:-1] < high)
            rises = np.flatnonzero((np.diff(part.log10_a) >= 0.0) & used)
            if rises.size:
                k = int(rises[0])
                message = (
                    f"shift table: log10 a_T does not fall from {part.log10_a[k]:.4g} at {both_scales(part.T[k])} to "
                    f"{part.log10_a[k + 1]:.4g} at {both_scales(part.T[k + 1])}; look at these points."
                )
                findings.append(Finding(id="table-not-monotone", severity="error", message=message))
        if isinstance(part, Polynomial):
            findings += _turning_points(part, low, high)
    law = _unwrapped(material.shift)
    if isinstance(law, Table):
        findings += _table_reference(law)
    if isinstance(law, WLF) and "base" not in card.law_table.model_fields_set:
        message = (
            'shift.base is not stated, so C1 belongs to log10 a_T; write base = 10, or base = "e" where C1 comes from '
            "natural logarithms, which is a factor of 2.3."
        )
        findings.append(Finding(id="base-not-stated", severity="note", message=message))
    return findings


def _turning_points(law: Polynomial, low: float, high: float) -> list[Finding]:
    """Where a polynomial does not fall between two temperatures [K]; near T_ref, where no service window is stated."""
    where = "inside the service window"
    if low == 0.0 or math.isinf(high):
        low, high, where = *_nearby(law.T_ref, low, high), "beside T_ref"
    turns = [f"turns at {both_scales(T)}" for T in law.knots if low < T < high]
    log10_a = np.polynomial.Polynomial([0.0, *law.coefficients])
    if not turns and low < high and log10_a(high - law.T_ref) >= log10_a(low - law.T_ref):
        turns = ["does not fall"]
    return [
        Finding(
            id="polynomial-not-monotone",
            severity="error",
            message=f"shift polynomial {turn}, {where}; a_T has to fall with temperature: fit it again, or with fewer "
            "coefficients.",
        )
        for turn in turns
    ]


def _nearby(T_ref: float, low: float, high: float) -> tuple[float, float]:
    """Two kelvin about T_ref, or at the end of the used range that is nearest to it."""
    middle = min(max(T_ref, low + 1.0), high - 1.0)
    return middle - 1.0, middle + 1.0


def _table_reference(law: Table) -> list[Finding]:
    try:
        miss = float(law.ln_shift(law.T_ref)) / math.log(10.0)
    except ShiftRangeError as error:
        return [Finding(id="table-reference", severity="error", message=f"{error}.")]
    if abs(miss) <= REFERENCE_TOLERANCE:
        return []
    message = (
        f"shift table: log10 a_T is {miss:.4g} at T_ref = {both_scales(law.T_ref)}, not 0; move T_ref or "
        "subtract the value."
    )
    return [Finding(id="table-reference", severity="error", message=message)]


def pole_findings(card: Card, material: Material) -> list[Finding]:
    """A pole inside the service window, or near it."""
    pole, window = material.shift.pole, card.service_temperature
    if pole is None or window is None:
        return []
    name, low = _unwrapped(material.shift).name, window[0]
    if pole >= low:
        message = (
            f"{name}: the pole T_inf = {both_scales(pole)} lies {pole - low:.4g} K above the lowest service "
            f"temperature {both_scales(low)}; the law has no answer there: use another law below, or raise the service "
            "temperature."
        )
        return [Finding(id="pole-in-service", severity="error", message=message)]
    if low - pole < NEAR_POLE:
        message = (
            f"{name}: the lowest service temperature {both_scales(low)} is {low - pole:.4g} K above the pole "
            f"{both_scales(pole)}, where a_T grows without limit; consider another law below T_ref."
        )
        return [Finding(id="pole-near-service", severity="warning", message=message)]
    return []


def measured_range_findings(card: Card, material: Material) -> list[Finding]:
    """A service window, or a reference temperature, beyond the range that the law was measured in."""
    law, window = material.shift, card.service_temperature
    if not isinstance(law, MeasuredRange):
        return []
    findings = []
    if not law.low <= law.T_ref <= law.high:
        message = (
            f"T_ref = {both_scales(law.T_ref)} lies outside the measured range; a_T is not 1 at T_ref where it is held."
        )
        findings.append(Finding(id="reference-beyond-measured", severity="warning", message=message))
    if window is None:
        return findings
    severity: Severity = "error" if law.outside == "refuse" else "warning"
    does = {"refuse": "the law refuses there", "hold": "a_T is held there", "extrapolate": "a_T is extrapolated there"}
    for beyond, T, side in ((law.low - window[0], window[0], "below"), (window[1] - law.high, window[1], "above")):
        if beyond > 1e-9:  # K: rounding of a temperature between units
            message = (
                f"service temperature {both_scales(T)} lies {beyond:.4g} K {side} the measured range; "
                f"{does[law.outside]}: measure further, or narrow the service window."
            )
            findings.append(Finding(id="beyond-measured-range", severity=severity, message=message))
    return findings
