"""Checks at the ends: no time at all, very much time, a jump of temperature."""

from __future__ import annotations

import numpy as np

from drivers.studies.audit.subject import ROUNDING, STRAIN, CheckResult, Subject, increment, take
from matlib.arrays import FloatArray
from matlib.routine import Update
from matlib.tensors import DEVIATORIC, IDENTITY

__all__ = ["long_increment", "temperature_jump", "zero_increment"]

LONG_LIMIT = 1e-6
"""Relative: a hold of 1e6 relaxation times and more has forgotten all that relaxes, to 1e-6 even at a gain or decay of 1/r."""

HOLDS = 49
LONG = (1e7, 1e12, 1e20, 1e30)


def _elastic(subject: Subject, strain: FloatArray, *, long_term: bool) -> FloatArray | None:
    """Stress of one limit of the card [Pa]; None without a card."""
    if subject.material is None:
        return None
    shear, bulk = subject.material.shear, subject.material.bulk
    G, K = (s.equilibrium if long_term else s.instantaneous for s in (shear, bulk))
    return 2.0 * G * (DEVIATORIC @ strain) + K * float(strain @ IDENTITY) * IDENTITY


def zero_increment(subject: Subject) -> CheckResult:
    """An increment of nothing changes nothing; a strain jump is answered with the instantaneous moduli."""
    T, strain = subject.T, STRAIN * np.array([0.5, -0.2, 0.1, 0.3, 0.1, -0.4])
    pull = increment(subject.duration, (T, T), np.zeros(6), strain)
    nothing = increment(0.0, (T, T), strain, strain, subject.duration)
    before, after = take(subject.routine, [pull, nothing])
    scale = float(np.abs(before.stress).max()) or 1.0
    measured = float(np.abs(after.stress - before.stress).max()) / scale
    message = "An increment of no time and no strain changes nothing, and a jump finds the instantaneous moduli."
    if measured > ROUNDING:
        message = f"An increment of no time, strain or temperature changed the stress by {100.0 * measured:.3g} %: look at dt = 0."
    exact = _elastic(subject, strain, long_term=False)
    if exact is not None:
        jump = take(subject.routine, [increment(0.0, (T, T), np.zeros(6), strain)])[0]
        off = float(np.abs(jump.stress - exact).max()) / float(np.abs(exact).max())
        if off > max(measured, ROUNDING):
            message = f"A strain jump in no time is {100.0 * off:.3g} % off the instantaneous moduli: the gain at dt = 0 has to be 1."
        measured = max(measured, off)
    return CheckResult(
        id="zero-increment", holds=measured <= ROUNDING, measured=measured, limit=ROUNDING, message=message
    )


def long_increment(subject: Subject) -> CheckResult:
    """One increment of up to 1e30 s after a jump: the long-term answer, and nothing that is not a number."""
    T, strain = subject.T, STRAIN * np.array([0.5, -0.2, 0.1, 0.3, 0.1, -0.4])
    jump = take(subject.routine, [increment(0.0, (T, T), np.zeros(6), strain)])[0]
    exact = _elastic(subject, strain, long_term=True)
    worst, at, settled = 0.0, LONG[0], None
    for seconds in LONG:
        held = subject.routine.update(increment(_scaled(subject, seconds), (T, T), strain, strain), jump.memory)
        if exact is None:
            settled = held.stress if settled is None else settled
        truth = exact if exact is not None else settled
        assert truth is not None
        error = float(np.abs(held.stress - truth).max()) / (float(np.abs(jump.stress).max()) or 1.0)
        if error > worst:
            worst, at = error, seconds
    rise, rise_at = _rise(subject, jump, strain)
    if rise > max(worst, LONG_LIMIT):
        message = (
            f"Held in one increment of dt, the stress rises again by {100.0 * rise:.3g} % of the jump's as dt grows past {rise_at:.3g} s: "
            "look at the sign and the size of the decay for r = dxi/tau about 1."
        )
        return CheckResult(id="long-increment", holds=False, measured=rise, limit=LONG_LIMIT, message=message)
    holds = worst <= LONG_LIMIT
    message = "Held for up to 1e30 s in one increment, the stress is the long-term one."
    if not holds:
        message = (
            f"Held for {at:.0e} relaxation times in one increment, the stress is {100.0 * worst:.3g} % of the jump's away from the long-term "
            "one: look at the decay for large dt (it has to go to 0: not to -1, which rings, and not beyond)."
        )
    return CheckResult(id="long-increment", holds=holds, measured=worst, limit=LONG_LIMIT, message=message)


def _rise(subject: Subject, jump: Update, strain: FloatArray) -> tuple[float, float]:
    """Largest rise of the stress of a hold in one increment as the increment gets longer, as a fraction of the jump's stress."""
    T, direction = subject.T, jump.stress / (float(np.linalg.norm(jump.stress)) or 1.0)
    durations = np.minimum(np.geomspace(1e-2 * subject.shortest, 1e2 * _scaled(subject, 1.0), HOLDS), 1e30)
    held = [
        float(subject.routine.update(increment(float(dt), (T, T), strain, strain), jump.memory).stress @ direction)
        for dt in durations
    ]
    rises = np.diff(held) / (float(np.linalg.norm(jump.stress)) or 1.0)
    k = int(rises.argmax())
    return float(rises[k]), float(durations[k])


def _scaled(subject: Subject, factor: float) -> float:
    """So many of the slowest relaxation times at the temperature of the subject, at most 1e30 s."""
    slowest = 1.0
    if subject.material is not None:
        times = np.concatenate([subject.material.shear.times, subject.material.bulk.times])
        ln_a = float(subject.material.shift.ln_shift(subject.T))
        slowest = float(np.exp(np.clip(np.log(times.max() if times.size else 1.0) + ln_a, -200.0, 200.0)))
    return min(max(factor * slowest, factor * 1e-6), 1e30)


def temperature_jump(subject: Subject) -> CheckResult:
    """A temperature jump in no time leaves the shear stress as it is, and the mean stress but for thermal expansion."""
    T, strain = subject.T, STRAIN * np.array([0.5, -0.2, 0.1, 0.3, 0.1, -0.4])
    low, high = subject.window.temperature
    ends = [T_end for T_end in (high, low) if T_end != T] or [T + 10.0]
    worst, message = 0.0, "A temperature jump in no time leaves the stress continuous, thermal expansion aside."
    for T_end in ends:
        pull = increment(subject.duration, (T, T), np.zeros(6), strain)
        jump = increment(0.0, (T, T_end), strain, strain, subject.duration)
        before, after = take(subject.routine, [pull, jump])
        change, scale = after.stress - before.stress, float(np.abs(before.stress).max()) or 1.0
        off = float(np.abs(DEVIATORIC @ change).max()) / scale
        if off > max(worst, ROUNDING):
            message = f"A jump to {T_end:.5g} K in no time changed the deviatoric stress by {100.0 * off:.3g} %: no reduced time passes at dt = 0."
        worst = max(worst, off)
        if subject.material is not None:
            alpha, K = subject.material.expansion, subject.material.bulk.instantaneous
            expected = -3.0 * K * alpha * (T_end - T)
            mean = float(change @ IDENTITY) / 3.0
            off = abs(mean - expected) / max(scale, abs(expected))
            if off > max(worst, ROUNDING):
                message = (
                    f"A jump to {T_end:.5g} K in no time changed the mean stress by {mean:.4g} Pa, where -3 K alpha dT = {expected:.4g} Pa: "
                    "look at the sign and the factor of the thermal strain."
                )
            worst = max(worst, off)
    return CheckResult(id="temperature-jump", holds=worst <= ROUNDING, measured=worst, limit=ROUNDING, message=message)
