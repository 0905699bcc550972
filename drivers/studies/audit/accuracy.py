"""Checks against the truth: closed forms, the reference solution, the order of convergence."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from drivers.difference import largest_difference, shared_rows
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.reference import solve
from drivers.studies.audit.subject import ROUNDING, SAFETY, STRAIN, CheckResult, Subject, segment_path, strain_path
from matlib.prony import PronySeries

__all__ = ["order", "path", "relaxation"]

HOLD = 96
MOST_DOUBLINGS = 4
ORDER_SLACK = 0.25
"""How far an observed order may fall short of the claimed one; tests of the study itself observe orders within 0.1."""

SHEAR = np.array([0.0, 0.0, 0.0, 0.0, 0.0, STRAIN])
VOLUME = np.array([STRAIN, STRAIN, STRAIN, 0.0, 0.0, 0.0])


def _without_card(id: str) -> CheckResult:
    message = "Not checked: needs the card that the routine is meant to be (--card, or card in its file)."
    return CheckResult(id=id, holds=True, measured=None, limit=None, message=message)


def _own_error(coarse: History, fine: History, order: float) -> float:
    """Error of the finer run that its change from the coarser one stands for, at the claimed order."""
    return largest_difference(fine, coarse).relative / (2.0**order - 1.0)


def _temperatures(subject: Subject) -> list[float]:
    assert subject.material is not None
    low, high = subject.window.temperature
    T_ref = subject.material.shift.T_ref
    return list(dict.fromkeys([T_ref, high, 0.5 * (T_ref + low)] if low <= T_ref <= high else [subject.T, high, low]))


def relaxation(subject: Subject) -> CheckResult:
    """A strain jump in shear and one in volume, held at several temperatures, against the closed form."""
    material = subject.material
    if material is None:
        return _without_card("relaxation")
    worst: tuple[float, float, str] = (-1.0, 1.0, "")
    right_at_reference, worst_T = True, material.shift.T_ref
    for T in _temperatures(subject):
        for what, strain, series, component, factor in (
            ("shear", SHEAR, material.shear, 5, STRAIN),
            ("volume", VOLUME, material.bulk, 0, 3.0 * STRAIN),
        ):
            measured, limit, hint = _hold(subject, T, what, strain, series, component, factor)
            if T == material.shift.T_ref and measured > limit:
                right_at_reference = False
            if measured / limit > worst[0] / worst[1]:
                worst, worst_T = (measured, limit, hint), T
    measured, limit, hint = worst
    holds = measured <= limit
    if right_at_reference and worst_T != material.shift.T_ref:
        place = hint.partition(": look at")[0]
        hint = f"{place}, while T_ref is right: look at the shift factor (log base, sign, reference, units)."
    message = "A held strain relaxes as the closed form says." if holds else hint
    return CheckResult(id="relaxation", holds=holds, measured=measured, limit=limit, message=message)


def _hold(
    subject: Subject, T: float, what: str, strain: np.ndarray, series: PronySeries, component: int, factor: float
) -> tuple[float, float, str]:
    """Largest relative error of a hold, its limit, and what to make of it."""
    material = subject.material
    assert material is not None
    ln_a = float(material.shift.ln_shift(T))
    slowest = float(series.times.max()) if series.times.size else 1.0
    duration = math.exp(min(max(math.log(3.0 * slowest) + ln_a, -200.0), 200.0))
    hold = segment_path(
        f"{what} hold",
        T,
        strain_path("jump", 0.0, strain),
        strain_path("hold", duration, strain, increments=HOLD, spacing="log"),
    )
    coarse, fine = drive(subject.routine, hold), drive(subject.routine, hold.refined(2))
    rows, own = shared_rows(hold, (1, HOLD), (1, 2 * HOLD))
    coarse, fine = coarse.taken(rows), fine.taken(own)
    with np.errstate(over="ignore"):
        xi = np.exp(np.log(np.maximum(fine.time, 1e-300)) - ln_a)
    exact = factor * series.relaxation(np.where(fine.time > 0.0, xi, 0.0))
    got = fine.stress_components[:, component]
    error = np.abs(got - exact)[1:] / float(np.abs(exact).max())
    limit = SAFETY * _own_error(coarse, fine, subject.order) + ROUNDING * (1.0 + abs(ln_a))
    row = int(error.argmax()) + 1
    return float(error.max()), limit, _relaxation_hint(what, T, material.shift.T_ref, fine, got, exact, row)


def _relaxation_hint(
    what: str, T: float, T_ref: float, fine: History, got: np.ndarray, exact: np.ndarray, row: int
) -> str:
    """One sentence: where the hold is off, by how much, and where to look."""
    at_once, late = got[1] / exact[1], (got[-1] / exact[-1] if exact[-1] != 0.0 else math.inf)
    place = f"in the {what} hold at {T:.6g} K the stress is {got[row] / exact[row]:.4g} times the closed form at {fine.time[row]:.3g} s"
    if abs(at_once - 1.0) > 1e-6:
        look = "already right after the jump: look at the instantaneous modulus"
        if min(abs(at_once - 2.0), abs(at_once - 0.5)) < 0.02 and what == "shear":
            look += " and at the factor 2 between engineering and tensor shear"
        return f"{place[0].upper()}{place[1:]}, {at_once:.4g} times {look}."
    if T != T_ref and abs(late - 1.0) < 0.02:
        return f"{place[0].upper()}{place[1:]}, right at both ends: look at the shift factor (log base, reference, sign) and the times."
    return (
        f"{place[0].upper()}{place[1:]}: look at the relaxation times, the fractions and the limit that they refer to."
    )


def _judged(subject: Subject, one: Path) -> tuple[float, float, str]:
    """Error of a battery path, its limit, and where it arises.

    Increments are doubled until the error is within what the routine's own change stands for, or `MOST_DOUBLINGS` is reached: a right
    routine gets there once its steps are small enough, a wrong one never does.
    """
    assert subject.material is not None
    counts = tuple(s.increments for s in one.segments)
    truth = solve(subject.material, one)
    coarse = drive(subject.routine, one)
    for doubling in range(1, MOST_DOUBLINGS + 1):
        factor = 2**doubling
        rows, own = shared_rows(one, counts, tuple(factor * n for n in counts))
        fine = drive(subject.routine, one.refined(factor)).taken(own)
        coarse = coarse.taken(rows)
        difference = largest_difference(truth.history.taken(rows), fine)
        limit = SAFETY * _own_error(coarse, fine, subject.order) + truth.relative_bound + ROUNDING
        if difference.relative <= limit:
            break
        coarse = fine
    at = difference.at
    where = f"{difference.component} in segment {at.segment!r} at {at.temperature:.5g} K"
    return difference.relative, limit, where


def path(subject: Subject) -> CheckResult:
    """The battery against the reference solution; the limit is the error that the routine's own change on halving stands for."""
    if subject.material is None:
        return _without_card("path")
    worst, worst_name, worst_where = (0.0, 1.0), "", ""
    for one in subject.paths():
        measured, limit, where = _judged(subject, one)
        if measured / limit > worst[0] / worst[1]:
            worst, worst_name, worst_where = (measured, limit), one.name, where
    measured, limit = worst
    if measured <= limit:
        message = "Every path of the battery agrees with the reference solution within the routine's own step error."
    else:
        message = (
            f"On path {worst_name!r} the routine is off by {100.0 * measured:.3g} % of the peak ({worst_where}), more than its step "
            f"error explains ({100.0 * limit:.2g} %): look at what that segment exercises and no passing check does."
        )
    return CheckResult(id="path", holds=measured <= limit, measured=measured, limit=limit, message=message)


def _smooth_paths(subject: Subject) -> Iterator[tuple[str, Path]]:
    """A pull at one temperature, and pulls while heating and cooling: as fast as the fastest term, which each increment resolves."""
    strain = np.array([STRAIN, -0.3 * STRAIN, 0.0, 0.0, 0.0, 0.5 * STRAIN])
    T, duration = subject.T, 2.0 * subject.shortest
    low, high = subject.window.temperature
    step = min(8.0, 0.5 * (high - low))
    yield "at one temperature", segment_path("pull", T, strain_path("pull", duration, strain, increments=1))
    if step > 0.0:
        for what, end in (("heating", T + step), ("cooling", T - step)):
            yield f"while {what}", segment_path(what, T, strain_path("pull", duration, strain, T=end, increments=1))


def order(subject: Subject) -> CheckResult:
    """Errors of a pull with doubled increments: they have to fall at the claimed order."""
    ladder = (16, 32, 64, 128) if subject.quick else (16, 32, 64, 128, 256, 512)
    seen: list[tuple[float, str]] = []
    for what, one in _smooth_paths(subject):
        base = one.with_increments(ladder[0])
        runs = {}
        for n in ladder:
            rows = shared_rows(one, (ladder[0],), (n,))[1]
            runs[n] = drive(subject.routine, one.with_increments(n)).taken(rows)
        if subject.material is not None:
            truth = solve(subject.material, base)
            exact, noise = truth.history, 10.0 * truth.relative_bound + ROUNDING
            counts = list(ladder)
        else:
            exact, noise, counts = runs[ladder[-1]], ROUNDING, list(ladder[:-2])
        errors = [largest_difference(exact, runs[n]).relative for n in counts]
        clear = [e for e in errors if e > noise]
        if len(clear) >= 2 and clear == errors[: len(clear)]:
            seen.append((math.log2(clear[-2] / clear[-1]), what))
    limit = subject.order - ORDER_SLACK
    if not seen:
        message = "The errors are too small to show an order."
        return CheckResult(id="order", holds=True, measured=None, limit=limit, message=message)
    slope, what = min(seen)
    if slope >= limit:
        message = f"Errors fall at order {slope:.2f} at least, where {subject.order:g} is claimed."
    else:
        message = f"Errors of a pull {what} fall at order {slope:.2f} only, where {subject.order:g} is claimed: " + (
            "look at how the reduced time of an increment is found."
            if what != "at one temperature"
            else "look at the recursion, or claim less."
        )
    return CheckResult(id="order", holds=slope >= limit, measured=slope, limit=limit, message=message)
