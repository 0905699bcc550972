"""Findings about a card: is it a material at all, and does it cover what the part sees?"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import numpy as np

from matlib.arrays import FloatArray
from matlib.card import Card
from matlib.card_faults import MODULUS_OF
from matlib.effective import poisson_ratio
from matlib.errors import FileError, ParameterError, ShiftRangeError, both_scales
from matlib.finding import Finding, is_admissible
from matlib.material import Material
from matlib.shift import MeasuredRange
from matlib.shift_findings import law_findings, measured_range_findings, pole_findings

__all__ = ["Finding", "check_card", "is_admissible"]

GRID = 400
LITTLE = 0.01
LARGEST_EXPANSION = 1e-3  # 1/K; rubbers have some 2e-4 (common practice, no source)


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
    ids = {fault: name for name, fault in card.constant_faults()}
    findings = _equal_times(card)
    try:
        material = card.material()
    except FileError as error:
        findings += [
            Finding(id=ids.get(fault, _fault_id(fault.key)), severity="error", message=f"{fault}.")
            for fault in error.faults
        ]
    else:
        findings += _behaviour(card, material)
    order = {"error": 0, "warning": 1, "note": 2}
    return sorted(findings, key=lambda finding: order[finding.severity])


def _fault_id(key: str) -> str:
    table = key.partition(".")[0]
    return {"elastic": "elastic-constants", "prony": "prony-series", "shift": "shift-law"}[table]


def _equal_times(card: Card) -> list[Finding]:
    findings = []
    for name in MODULUS_OF:
        rows = (getattr(card.document.prony, name) if card.document.prony else None) or []
        times = sorted(row[0] for row in rows)
        for time in sorted({a for a, b in itertools.pairwise(times) if a == b}):
            message = (
                f"prony.{name}: {times.count(time)} terms share the relaxation time {time:g}; merge them into one."
            )
            findings.append(Finding(id="times-equal", severity="warning", message=message))
    return findings


def _behaviour(card: Card, material: Material) -> list[Finding]:
    checks: list[Callable[[Card, Material], list[Finding]]] = [
        _long_term_stiffness,
        _hardly_relaxing,
        _poisson,
        law_findings,
        pole_findings,
        measured_range_findings,
        _shift_in_service,
        _expansion,
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


def _hardly_relaxing(card: Card, material: Material) -> list[Finding]:
    series = material.shear
    share = 1.0 - series.equilibrium / series.instantaneous
    if series.times.size == 0 or share >= LITTLE:
        return []
    message = (
        f"shear: all terms together carry {100.0 * share:.2g} % of the modulus, so the card is all but elastic; look at "
        "prony.relative_to, and whether each row is [relaxation time, fraction or modulus]."
    )
    return [Finding(id="hardly-relaxes", severity="warning", message=message)]


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
    # Beyond rounding only: a bulk modulus that dwarfs the shear modulus ends at 0.5 to the last digit.
    lowest, highest = int(nu.argmin()), int(nu.argmax())
    leaves = [(lowest, "below -1", nu[lowest] <= -1.0), (highest, "above 0.5", nu[highest] > 0.5 + 1e-9)]
    for k, end in [(k, end) for k, end, does in leaves if does]:
        when = "in the long term" if math.isinf(xi[k]) else f"at a reduced time of {xi[k]:.3g} s"
        message = (
            f"Poisson ratio leaves (-1, 0.5): {nu[k]:.4g}, {end}, {when}; "
            "look at the bulk series against the shear series."
        )
        findings.append(Finding(id="poisson-ratio", severity="error", message=message))
    return findings


def _expansion(card: Card, material: Material) -> list[Finding]:
    if card.document.expansion is None:
        message = "no [expansion] table, so thermal strain is taken as 0; add alpha where temperature changes matter."
        return [Finding(id="expansion-not-stated", severity="note", message=message)]
    if abs(material.expansion) > LARGEST_EXPANSION:
        message = (
            f"expansion.alpha is {material.expansion:.3g} 1/K, more than {LARGEST_EXPANSION:g} 1/K, which is not that of a solid; "
            "look at its unit: 26 ppm/K is 26e-6."
        )
        return [Finding(id="expansion-too-large", severity="warning", message=message)]
    return []


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
        end = (
            "it flows without resistance"
            if material.shear.equilibrium == 0.0
            else "it answers with its long-term moduli"
        )
        message = (
            f"the longest service time at {both_scales(T[hot])} is {long:.3g} decades longer than the longest "
            f"relaxation time; {end} there: add slower terms if the material still relaxes."
        )
        findings.append(Finding(id="beyond-long-times", severity="warning", message=message))
    return findings
