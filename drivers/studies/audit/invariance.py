"""Checks of what holds for every isotropic, passive material."""

from __future__ import annotations

import numpy as np

from drivers.studies.audit.memory import walk
from drivers.studies.audit.subject import ROUNDING, STRAIN, CheckResult, Subject, increment, take
from matlib.arrays import FloatArray
from matlib.tensors import rotation

__all__ = ["dissipation", "isotropy"]

CYCLE = 64


def _turned(seed: int) -> FloatArray:
    """A random rotation as a 6x6 Mandel matrix."""
    q, r = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))
    q *= np.sign(np.diag(r))
    return rotation(q if np.linalg.det(q) > 0.0 else -q)


def isotropy(subject: Subject) -> CheckResult:
    """A rotated strain path has a rotated stress."""
    worst, component = 0.0, 0
    plain = take(subject.routine, walk(subject, 6))
    for seed in range(2 if subject.quick else 5):
        Q = _turned(seed)
        turned = [
            increment(one.duration, one.temperature, Q @ one.strain[0], Q @ one.strain[1], one.time)
            for one in walk(subject, 6)
        ]
        for a, b in zip(plain, take(subject.routine, turned), strict=True):
            gap = np.abs(Q @ a.stress - b.stress) / (float(np.abs(a.stress).max()) or 1.0)
            if gap.max() > worst:
                worst, component = float(gap.max()), int(gap.argmax())
    holds = worst <= ROUNDING
    names = ("11", "22", "33", "23", "13", "12")
    message = (
        "A rotated strain path has a rotated stress."
        if holds
        else f"The stress of a rotated strain path is {100.0 * worst:.3g} % off the rotated stress, most in component {names[component]}: look at "
        "the factors of the shear components and at terms that single components lack."
    )
    return CheckResult(id="isotropy", holds=holds, measured=worst, limit=ROUNDING, message=message)


def _work(subject: Subject, amplitude: FloatArray, period: float, count: int) -> float:
    """Work over two closed strain cycles from rest, as a fraction of peak stress times strain."""
    t = np.arange(1, 2 * count + 1) / count
    strains = np.concatenate([np.zeros((1, 6)), np.sin(2.0 * np.pi * t)[:, np.newaxis] * amplitude])
    T = (subject.T, subject.T)
    steps = [increment(period / count, T, strains[k], strains[k + 1], k * period / count) for k in range(2 * count)]
    stresses = np.stack([np.zeros(6), *(u.stress for u in take(subject.routine, steps))])
    work = float(np.sum(0.5 * (stresses[1:] + stresses[:-1]) * np.diff(strains, axis=0)))
    return work / (float(np.abs(stresses).max()) * float(np.linalg.norm(amplitude)) or 1.0)


def dissipation(subject: Subject) -> CheckResult:
    """No closed strain cycle from rest gives energy out, beyond what the step size explains."""
    worst, limit, slowest = 0.0, ROUNDING, 0.0
    amplitudes = (np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0]), np.array([0.0, 0.0, 0.0, 0.0, 0.0, 1.0]))
    count = CYCLE // 2 if subject.quick else CYCLE
    for share in (0.1, 1.0, 10.0):
        for amplitude in amplitudes:
            period = share * subject.duration
            coarse, fine = (_work(subject, STRAIN * amplitude, period, n) for n in (count, 2 * count))
            out = max(0.0, -fine)
            allowed = abs(fine - coarse) / (2.0**subject.order - 1.0) + ROUNDING
            if out / allowed > worst / limit:
                worst, limit, slowest = out, allowed, period
    holds = worst <= limit
    message = (
        "No closed cycle gives energy out."
        if holds
        else f"A closed cycle of {slowest:.3g} s gave out {100.0 * worst:.3g} % of peak stress times strain: a fraction or a decay has the "
        "wrong sign, or the recursion is not stable."
    )
    return CheckResult(id="dissipation", holds=holds, measured=worst, limit=limit, message=message)
