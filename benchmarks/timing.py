"""Times that can be compared on a machine that does other things as well."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from matlib.arrays import FloatArray

__all__ = ["Timing", "interleaved", "ratio"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Timing:
    """Seconds of each round.

    Parameters
    ----------
    rounds : ndarray, shape (rounds,)
    """

    rounds: FloatArray

    @property
    def least(self) -> float:
        """The round that was least disturbed [s]."""
        return float(self.rounds.min())

    @property
    def median(self) -> float:
        """The middle one [s]."""
        return float(np.median(self.rounds))


def interleaved(tasks: Mapping[str, Callable[[], object]], rounds: int) -> dict[str, Timing]:
    """Time tasks in turn, round after round, so that whatever else the machine does meets all of them alike.

    Each task runs once before, untimed: it compiles, and fills the caches.
    """
    for task in tasks.values():
        task()
    seconds: dict[str, list[float]] = {name: [] for name in tasks}
    for _ in range(rounds):
        for name, task in tasks.items():
            start = time.perf_counter()
            task()
            seconds[name].append(time.perf_counter() - start)
    return {name: Timing(rounds=np.array(values)) for name, values in seconds.items()}


def ratio(a: Timing, b: Timing) -> dict[str, float]:
    """How much longer `a` takes than `b`: of the least disturbed rounds, and the quartiles of round against round."""
    each = a.rounds / b.rounds
    low, middle, high = np.quantile(each, [0.25, 0.5, 0.75])
    return {"of_least": a.least / b.least, "median": float(middle), "quartile_1": float(low), "quartile_3": float(high)}
