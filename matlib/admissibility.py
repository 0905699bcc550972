"""Findings about a card: is it a material at all, and does it cover what the part sees?"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from matlib.arrays import FloatArray
from matlib.card import SERIES, Card, constant_faults
from matlib.effective import poisson_ratio
from matlib.errors import FileError, ParameterError, ShiftRangeError, both_scales
from matlib.material import Material
from matlib.shift import Crossover, MeasuredRange, Polynomial, ShiftLaw, Table

__all__ = ["Finding", "Severity", "check_card", "is_admissible"]

Severity = Literal["error", "warning", "note"]

NEAR_POLE = 15.0
"""A service temperature closer to the pole than this [K] is worth a warning; common practice, no source."""

REFERENCE_TOLERANCE = 1e-3
"""Decades by which a table may miss log10 a_T = 0 at T_ref; a hundredth of what a master curve resolves."""

GRID = 400


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One thing to know about a card.

    Parameters
    ----------
    id : str
        Stable name, for scripts.
    severity : {"error", "warning", "note"}
        "error": the card cannot be used as it is; "warning": somebody has to decide; "note": good to know.
    message : str
        One sentence with the numbers and what to do.
    """

    id: str
    severity: Severity
    message: str


def is_admissible(findings: list[Finding]) -> bool:
    """Whether no finding is an error."""
    return all(finding.severity != "error" for finding in findings)


def check_card(card: Card) -> list[Finding]:
    """Check a card.

    Parameters
    ----------
    card : Card

    Returns
    -------
    findings : list of Finding
        Errors first; empty for a card with nothing to say about.
    """
    findings = [Finding(id=name, severity="error", message=f"{fault}.") for name, fault in constant_faults(card)]
    findings += _equal_times(card)
    if is_admissible(findings):
        try:
            material = card.material()
        except FileError as error:
            findings += [
                Finding(id=_fault_id(fault.key), severity="error", message=f"{fault}.") for fault in error.faults
            ]
        else:
            findings += _behaviour(card, material)
    order = {"error": 0, "warning": 1, "note": 2}
    return sorted(findings, key=lambda finding: order[finding.severity])


def _fault_id(key: str) -> str:
    if "sum of fractions" in key:
        return "fractions-reach-one"
    table = key.partition(".")[0]
    return {"elastic": "elastic-constants", "prony": "prony-series", "shift": "shift-law"}.get(table, "constants")


def _equal_times(card: Card) -> list[Finding]:
    findings = []
    for name in SERIES:
        rows = (getattr(card.document.prony, name) if card.document.prony else None) or []
        times = sorted(row[0] for row in rows)
        for time in sorted({a for a, b in zip(times, times[1:], strict=False) if a == b}):
            message = f"prony.{name}: {times.count(time)} terms share the relaxation time {time:g}; merge them into one."
            findings.append(Finding(id="times-equal", severity="warning", message=message))
    return findings


def _behaviour(card: Card, material: Material) -> list[Finding]:
    checks: list[Callable[[Card, Material], list[Finding]]] = [
        _long_term_stiffness,
        _poisson,
        _law_itself,
        _pole,
        _measured_range,
        _shift_in_service,
    ]
    findings = [finding for check in checks for finding in check(card, material)]
    if card.document.service is None:
        message = "no [service] table, so coverage of times and temperatures was not checked; add one."
        findings.append(Finding(id="service-not-stated", severity="note", message=message))
    return findings


def _long_term_stiffness(card: Card, material: Material) -> list[Finding]:
    findings = []
    for name, series in (("shear", material.shear), ("bulk", material.bulk)):
        if series.equilibrium == 0.0:
            message = (
                f"{name}: the fractions reach 1, so no long-term stiffness is left and the material flows; right for "
                "a melt, otherwise look at the fractions and at prony.relative_to."
            )
            findings.append(Finding(id="no-long-term-stiffness", severity="warning", message=message))
    return findings


def _poisson(card: Card, material: Material) -> list[Finding]:
    try:
        ratio = poisson_ratio(material.shear, material.bulk)
    except ParameterError as error:
        return [Finding(id="poisson-ratio", severity="warning", message=f"Poisson ratio not found: {error}.")]
    times = np.concatenate([material.shear.times, material.bulk.times])
    if times.size == 0:
        return []
    xi = np.geomspace(times.min() * 1e-3, times.max() * 1e3, GRID)
    nu = np.concatenate([[ratio.instantaneous], ratio.at(xi), [ratio.long_term]])
    xi = np.concatenate([[0.0], xi, [math.inf]])
    findings = []
    for k, end in ((int(nu.argmin()), "below -1"), (int(nu.argmax()), "above 0.5")):
        # Beyond rounding only: a bulk modulus that dwarfs the shear modulus ends at 0.5 to the last digit.
        if -1.0 < nu[k] < 0.5 + 1e-9:
            continue
        when = "in the long term" if math.isinf(xi[k]) else f"at a reduced time of {xi[k]:.3g} s"
        message = (
            f"Poisson ratio leaves (-1, 0.5): {nu[k]:.4g}, {end}, {when}; look at the bulk series against the shear series."
        )
        findings.append(Finding(id="poisson-ratio", severity="error", message=message))
    return findings


def _unwrapped(law: ShiftLaw) -> ShiftLaw:
    return law.law if isinstance(law, MeasuredRange) else law


def _law_itself(card: Card, material: Material) -> list[Finding]:
    """A table or a polynomial that is not monotone; a table that is not zero at T_ref."""
    law, findings = _unwrapped(material.shift), []
    for part in (law.below, law.above) if isinstance(law, Crossover) else (law,):
        if isinstance(part, Table):
            rises = np.flatnonzero(np.diff(part.log10_a) >= 0.0)
            if rises.size:
                k = int(rises[0])
                message = (
                    f"shift table: log10 a_T does not fall from {part.log10_a[k]:.4g} at {both_scales(part.T[k])} to "
                    f"{part.log10_a[k + 1]:.4g} at {both_scales(part.T[k + 1])}; look at these points."
                )
                findings.append(Finding(id="table-not-monotone", severity="error", message=message))
            miss = float(part.ln_shift(part.T_ref)) / math.log(10.0)
            if abs(miss) > REFERENCE_TOLERANCE:
                message = (
                    f"shift table: log10 a_T is {miss:.4g} at T_ref = {both_scales(part.T_ref)}, not 0; move T_ref or "
                    "subtract the value."
                )
                findings.append(Finding(id="table-reference", severity="error", message=message))
        if isinstance(part, Polynomial) and part.knots:
            window = card.service_temperature or (part.T_ref - 1.0, part.T_ref + 1.0)
            for T in part.knots:
                if window[0] < T < window[1]:
                    message = (
                        f"shift polynomial turns at {both_scales(T)}, inside the service window; "
                        "a_T has to fall with temperature: fit it again, or with fewer coefficients."
                    )
                    findings.append(Finding(id="polynomial-not-monotone", severity="error", message=message))
    return findings


def _pole(card: Card, material: Material) -> list[Finding]:
    pole, window = material.shift.pole, card.service_temperature
    if pole is None or window is None:
        return []
    name, low = _unwrapped(material.shift).name, window[0]
    held = isinstance(material.shift, MeasuredRange) and material.shift.outside == "hold"
    if held and isinstance(material.shift, MeasuredRange) and material.shift.low > pole:
        return []
    if pole >= low:
        message = (
            f"{name}: the pole T_inf = {both_scales(pole)} lies {pole - low:.4g} K above the lowest service temperature "
            f"{both_scales(low)}; the law has no answer there: use another law below, or raise the service temperature."
        )
        return [Finding(id="pole-in-service", severity="error", message=message)]
    if low - pole < NEAR_POLE:
        message = (
            f"{name}: the lowest service temperature {both_scales(low)} is {low - pole:.4g} K above the pole "
            f"{both_scales(pole)}, where a_T grows without limit; consider another law below T_ref."
        )
        return [Finding(id="pole-near-service", severity="warning", message=message)]
    return []


def _measured_range(card: Card, material: Material) -> list[Finding]:
    law, window = material.shift, card.service_temperature
    if not isinstance(law, MeasuredRange):
        return []
    findings = []
    if not law.low <= law.T_ref <= law.high:
        message = f"T_ref = {both_scales(law.T_ref)} lies outside the measured range; a_T is not 1 at T_ref where it is held."
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


def _shift_in_service(card: Card, material: Material) -> list[Finding]:
    """Reduced service times against the relaxation times."""
    window, times = card.service_temperature, card.service_time
    if window is None or times is None:
        return []
    T = np.linspace(*window, GRID)
    try:
        ln_a = material.shift.ln_shift(T)
    except ShiftRangeError as error:
        if material.shift.pole is not None and material.shift.pole >= window[0]:
            return []  # said already
        if isinstance(material.shift, MeasuredRange) and material.shift.outside == "refuse":
            return []
        return [Finding(id="no-shift-factor", severity="error", message=f"{error}.")]
    relaxing: FloatArray = np.concatenate([material.shear.times, material.bulk.times])
    if relaxing.size == 0:
        return []
    to_decades = 1.0 / math.log(10.0)
    cold, hot = int(ln_a.argmax()), int(ln_a.argmin())
    short = (math.log(relaxing.min()) - math.log(times[0]) + float(ln_a[cold])) * to_decades
    long = (math.log(times[1]) - float(ln_a[hot]) - math.log(relaxing.max())) * to_decades
    findings = []
    if short > 0.0:
        message = (
            f"the shortest service time at {both_scales(T[cold])} is {short:.3g} decades shorter than the shortest "
            "relaxation time; the card answers with its instantaneous moduli there."
        )
        findings.append(Finding(id="beyond-short-times", severity="note", message=message))
    if long > 0.0:
        end = "it flows without resistance" if material.shear.equilibrium == 0.0 else "it answers with its long-term moduli"
        message = (
            f"the longest service time at {both_scales(T[hot])} is {long:.3g} decades longer than the longest relaxation "
            f"time; {end} there: add slower terms if the material still relaxes."
        )
        findings.append(Finding(id="beyond-long-times", severity="warning", message=message))
    return findings
