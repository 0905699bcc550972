"""How time and memory grow: with increments, with terms, with the members of an ensemble."""

from __future__ import annotations

import subprocess
import sys
from typing import Any

import numpy as np

from benchmarks.case import SEED, case, resin
from benchmarks.engines import kernel
from benchmarks.timing import interleaved, ratio
from drivers.ensemble import run_ensemble
from drivers.path import MODES, Path, Segment
from drivers.point import drive
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["ensembles", "increments", "memory", "terms", "thermal_path"]

PEAK = """
import resource, sys
from benchmarks.case import resin
from benchmarks.growth import thermal_path
from drivers.point import drive
from matlib.viscoelastic import LinearViscoelastic
routine = LinearViscoelastic(material=resin(20))
drive(routine, thermal_path(10_000), keep="ends")
before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
drive(routine, thermal_path(int(sys.argv[1])), keep="ends")
print(before, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)
"""


def thermal_path(increments: int, *, segments: int = 1) -> Path:
    """A uniaxial pull while the temperature goes up and down, `increments` in all, no two with one rate."""
    controlled = np.array([False, True, True, True, True, True])

    def part(number: int) -> Segment:
        return Segment(
            label=f"part {number}",
            durations=np.array([1e4]),
            temperatures=np.array([363.15 if number % 2 == 0 else 343.15]),
            targets=np.array([[0.01 * (number + 1) / segments, 0, 0, 0, 0, 0]]),
            stress_controlled=controlled,
            held=np.zeros(6, dtype=np.bool_),
            increments=increments // segments,
        )

    return Path(
        name="pull",
        mode=MODES["uniaxial stress"],
        start_temperature=353.15,
        parts=tuple(part(k) for k in range(segments)),
    )


def increments(counts: list[int], rounds: int) -> dict[str, Any]:
    """Time of `drive` with probes only, an increment, against the number of increments."""
    routine = LinearViscoelastic(material=resin(20))
    paths = {str(count): thermal_path(count) for count in counts}
    tasks = {name: lambda path=path: drive(routine, path, keep="ends") for name, path in paths.items()}
    timings = interleaved(tasks, rounds)
    each = {name: timing.least / int(name) for name, timing in timings.items()}
    long = [seconds for name, seconds in each.items() if int(name) >= 10_000]
    return {
        "seconds_an_increment": each,
        "largest_over_smallest_from_1e4_on": max(long) / min(long) if long else None,
    }


def terms(counts: list[int], n: int, rounds: int) -> dict[str, Any]:
    """Time of the kernel, an increment, against the number of terms."""
    timings = interleaved({str(count): kernel(case(n, count)) for count in counts}, rounds)
    return {"seconds_an_increment": {name: timing.least / n for name, timing in timings.items()}}


def ensembles(sizes: list[int], n: int, rounds: int, terms_each: int = 20) -> dict[str, Any]:
    """Sampled cards on one path: one thread against two, and a term-update against that of the single kernel."""
    rng = np.random.default_rng(SEED)
    path = thermal_path(n, segments=2)
    single = LinearViscoelastic(material=resin(terms_each))
    results: dict[str, Any] = {"increments": n, "terms": terms_each, "sizes": {}}
    for size in sizes:
        cards = [resin(terms_each, spread=0.1, rng=rng) for _ in range(size)]
        timings = interleaved(
            {
                "one thread": lambda cards=cards: run_ensemble(cards, path, threads=1),
                "two threads": lambda cards=cards: run_ensemble(cards, path, threads=2),
                "single": lambda: drive(single, path, keep="ends"),
            },
            rounds,
        )
        updates = size * n * terms_each
        results["sizes"][str(size)] = {
            "seconds_one_thread": timings["one thread"].least,
            "seconds_two_threads": timings["two threads"].least,
            "one_over_two_threads": ratio(timings["one thread"], timings["two threads"]),
            "seconds_a_term_update_one_thread": timings["one thread"].least / updates,
            "seconds_a_term_update_of_drive": timings["single"].least / (n * terms_each),
        }
    return results


def memory(count: int) -> dict[str, Any]:
    """By how much the peak of a process grows from ten thousand increments to `count`, with probes only."""
    run = subprocess.run(
        [sys.executable, "-c", PEAK, str(count)], capture_output=True, text=True, timeout=600, check=True
    )
    before, after = (int(word) for word in run.stdout.split())
    return {"increments": count, "peak_KiB_after_1e4": before, "peak_KiB": after}
