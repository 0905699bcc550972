"""Checks that a routine keeps nothing of its own between calls."""

from __future__ import annotations

import numpy as np

from drivers.studies.audit.subject import STRAIN, CheckResult, Subject, increment, take
from matlib.arrays import FloatArray
from matlib.routine import Increment, Routine, Update

__all__ = ["repeatable", "restart", "two_points", "walk"]


def walk(subject: Subject, seed: int, count: int = 6) -> list[Increment]:
    """A random strain walk with changing temperature and increments of different length."""
    rng = np.random.default_rng(seed)
    low, high = subject.window.temperature
    T = np.clip(subject.T + 0.2 * (high - low) * rng.uniform(-1.0, 1.0, count + 1), low, high)
    strains = np.concatenate([np.zeros((1, 6)), STRAIN * rng.uniform(-1.0, 1.0, (count, 6))])
    lengths = subject.duration * 10.0 ** rng.uniform(-2.0, 1.0, count)
    times = np.concatenate([[0.0], np.cumsum(lengths)])
    return [
        increment(float(lengths[k]), (float(T[k]), float(T[k + 1])), strains[k], strains[k + 1], float(times[k]))
        for k in range(count)
    ]


def _gap(first: list[Update], second: list[Update]) -> float:
    """Largest difference of stress, tangent and memory, relative to the largest stress and tangent entry; 0 for equal bits."""
    worst = 0.0
    for a, b in zip(first, second, strict=True):
        for one, other in ((a.stress, b.stress), (a.tangent, b.tangent), (a.memory, b.memory)):
            size = float(np.abs(one).max()) if one.size else 0.0
            if one.size:
                worst = max(worst, float(np.abs(one - other).max()) / (size or 1.0))
    return worst


def _result(id: str, measured: float, good: str, bad: str) -> CheckResult:
    return CheckResult(
        id=id, holds=measured == 0.0, measured=measured, limit=0.0, message=good if measured == 0.0 else bad
    )


def repeatable(subject: Subject) -> CheckResult:
    """The same walk twice, with another one between."""
    steps, other = walk(subject, 1), walk(subject, 2)
    first = take(subject.routine, steps)
    take(subject.routine, other)
    second = take(subject.routine, steps)
    twice = [subject.routine.update(steps[-1], first[-2].memory) for _ in range(2)]
    measured = max(_gap(first, second), _gap(twice[:1], twice[1:]), _gap(first[-1:], twice[:1]))
    return _result(
        "repeatable",
        measured,
        "The same increments give the same bits, whatever was computed between.",
        f"The same increments gave results {100.0 * measured:.3g} % apart: the routine keeps something between calls (a static or "
        "global variable, an array that is not set), where all it remembers has to go through memory.",
    )


def _halves(one: Increment) -> list[Increment]:
    middle = 0.5 * (one.strain[0] + one.strain[1])
    T = 0.5 * (one.temperature[0] + one.temperature[1])
    half = 0.5 * one.duration
    return [
        increment(half, (one.temperature[0], T), one.strain[0], middle, one.time),
        increment(half, (T, one.temperature[1]), middle, one.strain[1], one.time + half),
    ]


def restart(subject: Subject) -> CheckResult:
    """An increment that is abandoned and taken again in two halves leaves no trace."""
    *before, last = walk(subject, 3)
    memory = take(subject.routine, before)[-1].memory
    kept = memory.copy()
    first = take(subject.routine, _halves(last), memory)
    subject.routine.update(last, memory)  # abandoned
    second = take(subject.routine, _halves(last), memory)
    changed = float(np.abs(memory - kept).max()) if memory.size else 0.0
    measured = max(_gap(first, second), changed)
    return _result(
        "restart",
        measured,
        "An abandoned increment leaves no trace.",
        f"Two halves taken after an abandoned increment differ by {100.0 * measured:.3g} % from the same halves taken at once: the routine "
        "changes the memory it is given, or remembers the abandoned increment.",
    )


def two_points(subject: Subject) -> CheckResult:
    """Two points in turn give what each gives alone."""
    walks = (walk(subject, 4), walk(subject, 5))
    alone = [take(subject.routine, steps) for steps in walks]
    together = _interleaved(subject.routine, *walks)
    measured = max(_gap(a, b) for a, b in zip(alone, together, strict=True))
    return _result(
        "two-points",
        measured,
        "Two points taken in turn do not see each other.",
        f"Two points taken in turn differ by {100.0 * measured:.3g} % from the same points alone: they share something that belongs "
        "into each point's memory.",
    )


def _interleaved(routine: Routine, first: list[Increment], second: list[Increment]) -> list[list[Update]]:
    memories: list[FloatArray] = [np.zeros(routine.memory_size), np.zeros(routine.memory_size)]
    updates: list[list[Update]] = [[], []]
    for pair in zip(first, second, strict=True):
        for k, one in enumerate(pair):
            update = routine.update(one, memories[k])
            memories[k] = update.memory
            updates[k].append(update)
    return updates
