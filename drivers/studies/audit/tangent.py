"""Checks of the tangent."""

from __future__ import annotations

import numpy as np

from drivers.studies.audit.subject import STRAIN, CheckResult, Subject, increment, take
from matlib.arrays import FloatArray
from matlib.routine import Increment, Update
from matlib.tensors import DEVIATORIC, VOLUMETRIC

__all__ = ["tangent", "tangent_symmetry"]

STEP = 1e-5
"""Strain step of the central differences: their rounding is 2e-16 * 0.01 / 1e-5, their truncation 1e-10 for a curved stress."""

TANGENT_LIMIT = 1e-7
SYMMETRY_LIMIT = 1e-10
DURATIONS = (0.0, 1e-3, 0.1, 1.0, 10.0, 1e3)


def _probes(subject: Subject) -> list[tuple[Increment, FloatArray]]:
    """Increments of very different length, with the memory they start from."""
    first = np.array([0.4, -0.1, 0.2, 0.1, -0.2, 0.3]) * STRAIN
    second = np.array([-0.2, 0.5, 0.1, 0.3, 0.2, -0.4]) * STRAIN
    T, unit = subject.T, subject.duration
    low, high = subject.window.temperature
    T_end = T + 0.1 * (high - low)
    start = take(subject.routine, [increment(unit, (T, T), np.zeros(6), first)])[-1].memory
    return [(increment(share * unit, (T, T_end if share else T), first, second), start) for share in DURATIONS]


def _differences(subject: Subject, one: Increment, memory: FloatArray) -> FloatArray:
    """Derivative of the stress by central differences."""
    C = np.empty((6, 6))
    for c in range(6):
        ends = []
        for sign in (1.0, -1.0):
            end = one.strain[1].copy()
            end[c] += sign * STEP
            moved = increment(one.duration, one.temperature, one.strain[0], end)
            ends.append(subject.routine.update(moved, memory).stress)
        C[:, c] = (ends[0] - ends[1]) / (2.0 * STEP)
    return C


def _stiffness(C: FloatArray, projector: FloatArray) -> float:
    """Mean stiffness in the space of a projector."""
    return float(np.sum(C * projector) / np.trace(projector))


def tangent(subject: Subject) -> CheckResult:
    """The tangent against central differences of the routine's own stress."""
    worst, message = 0.0, "The tangent is the derivative of the stress, from jumps to long increments."
    for one, memory in _probes(subject):
        update = subject.routine.update(one, memory)
        C = _differences(subject, one, memory)
        scale = float(np.abs(C).max()) or 1.0
        error = float(np.abs(update.tangent - C).max()) / scale
        if error > max(worst, TANGENT_LIMIT):
            message = _tangent_hint(update, C, one.duration)
        worst = max(worst, error)
    return CheckResult(id="tangent", holds=worst <= TANGENT_LIMIT, measured=worst, limit=TANGENT_LIMIT, message=message)


def _tangent_hint(update: Update, C: FloatArray, duration: float) -> str:
    parts = []
    for what, projector in (("shear", DEVIATORIC), ("volume", VOLUMETRIC)):
        true, given = _stiffness(C, projector), _stiffness(update.tangent, projector)
        off = given / true - 1.0 if true != 0.0 else 0.0
        if abs(off) > 1e-6:
            parts.append(f"{abs(100.0 * off):.3g} % too {'stiff' if off > 0.0 else 'soft'} in {what}")
    found = " and ".join(parts) or "right in mean shear and volume, but wrong in single entries"
    hint = "it may leave out the relaxing terms, or weigh them otherwise than the stress does"
    if not parts:
        hint = "look at its symmetry, the order of components and the factor of engineering shear"
    return f"At dt = {duration:.3g} s the tangent is {found}: {hint}."


def tangent_symmetry(subject: Subject) -> CheckResult:
    """An isotropic linear material has a symmetric tangent."""
    worst, at = 0.0, (0, 0)
    for one, memory in _probes(subject):
        C = subject.routine.update(one, memory).tangent
        gap = np.abs(C - C.T) / (float(np.abs(C).max()) or 1.0)
        if gap.max() > worst:
            worst = float(gap.max())
            row, column = np.unravel_index(int(gap.argmax()), gap.shape)
            at = (int(row) + 1, int(column) + 1)
    holds = worst <= SYMMETRY_LIMIT
    message = (
        "The tangent is symmetric."
        if holds
        else f"Entries ({at[0]}, {at[1]}) and ({at[1]}, {at[0]}) of the tangent differ by {100.0 * worst:.3g} % of its largest entry: "
        "look at how it is filled, row by row."
    )
    return CheckResult(id="tangent-symmetry", holds=holds, measured=worst, limit=SYMMETRY_LIMIT, message=message)
