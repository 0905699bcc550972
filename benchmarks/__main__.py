"""``python -m benchmarks [--quick] [--json FILE]``: are the answers the same, and then, how long does each take?"""

from __future__ import annotations

import argparse
import json
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from benchmarks.agreement import agreement
from benchmarks.case import Case, case
from benchmarks.engines import Engine, c_engines, convolution, filtered, integrated, kernel, numpy_loop
from benchmarks.growth import ensembles, increments, memory, terms
from benchmarks.processes import processes
from benchmarks.report import lines, machine
from benchmarks.timing import interleaved, ratio

ROUNDING = 1e-11
"""Of the peak: sums of some hundred thousand increments, each rounded, in another order."""

SOLVER = 1e-8
"""Tolerance of the solver, and ten times that for its answer: its error control is local."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """How much is run."""

    rounds: int
    few: int
    n: int
    n_loop: int
    n_square: int
    n_solver: int
    counts: list[int]
    term_counts: list[int]
    sizes: list[int]
    ensemble_n: int
    memory_n: int
    process_rounds: int
    slow_rounds: int


FULL = Plan(
    rounds=41,
    few=5,
    n=200_000,
    n_loop=20_000,
    n_square=2_000,
    n_solver=20,
    counts=[10**k for k in range(3, 8)],
    term_counts=[1, 2, 4, 8, 16, 20, 32, 40, 60],
    sizes=[10, 100, 1000],
    ensemble_n=1000,
    memory_n=10**7,
    process_rounds=41,
    slow_rounds=7,
)
QUICK = Plan(
    rounds=2,
    few=1,
    n=2_001,
    n_loop=301,
    n_square=101,
    n_solver=3,
    counts=[1_000, 10_000],
    term_counts=[1, 20, 40],
    sizes=[5],
    ensemble_n=100,
    memory_n=20_000,
    process_rounds=1,
    slow_rounds=0,
)


def compared(subject: Case, others: dict[str, tuple[Engine, float]], rounds: int, skipped: list[str]) -> dict[str, Any]:
    """The kernel against others on one case: answers first."""
    own = kernel(subject)
    differences = agreement(np.array(own()), others)
    timings = interleaved({"kernel": own, **{name: engine for name, (engine, _) in others.items()}}, rounds)
    return {
        "increments": subject.n,
        "terms": subject.routine.material.shear.times.size,
        "skipped": skipped,
        "kernel_seconds_an_increment": timings["kernel"].least / subject.n,
        "engines": {
            name: {
                "seconds_an_increment": timings[name].least / subject.n,
                "median_seconds_an_increment": timings[name].median / subject.n,
                "kernel_over_this": ratio(timings["kernel"], timings[name]),
                "difference": differences[name],
                "tolerance": tolerance,
            }
            for name, (_, tolerance) in others.items()
        },
    }


def measure(plan: Plan) -> dict[str, Any]:
    """Everything."""
    uneven, even = case(plan.n), case(plan.n, even=True)
    in_c, reason = c_engines(uneven)
    skipped = [f"C: {reason}"] if reason else []
    loop, square, solver = case(plan.n_loop), case(plan.n_square), case(plan.n_solver)
    rivals: dict[str, tuple[Case, dict[str, tuple[Engine, float]], int]] = {
        "unequal increments, changing temperature": (
            uneven,
            {name: (engine, _c_tolerance(name)) for name, engine in in_c.items()},
            plan.rounds,
        ),
        "equal increments, one temperature": (even, {"scipy lfilter": (filtered(even), ROUNDING)}, plan.few),
        "a loop in Python": (loop, {"numpy loop": (numpy_loop(loop), ROUNDING)}, plan.few),
        "the whole history each time": (square, {"O(N^2) sum": (convolution(square), ROUNDING)}, plan.few),
        "rate equations": (solver, {"scipy solve_ivp": (integrated(solver, SOLVER), 10.0 * SOLVER)}, plan.few),
    }
    kernels = {
        name: _told(name, lambda given=given: compared(*given, skipped if given[0] is uneven else []))
        for name, given in rivals.items()
    }
    parts: dict[str, Callable[[], Any]] = {
        "increments": lambda: increments(plan.counts, plan.few),
        "terms": lambda: terms(plan.term_counts, min(plan.n, 20_000), plan.rounds),
        "ensembles": lambda: ensembles(plan.sizes, plan.ensemble_n, plan.few),
        "memory": lambda: memory(plan.memory_n),
        "processes": lambda: processes(plan.process_rounds, plan.slow_rounds),
    }
    return {"machine": machine(), "kernel": kernels, **{name: _told(name, part) for name, part in parts.items()}}


def _told(name: str, part: Callable[[], Any]) -> Any:
    print(f"{name} ...", file=sys.stderr, flush=True)
    return part()


def _c_tolerance(name: str) -> float:
    """The gain from one exp alone loses digits as r falls."""
    return 1e-6 if name.endswith("(exp)") else ROUNDING


def main(arguments: list[str] | None = None) -> int:
    """Measure, print, and write JSON where asked to."""
    parser = argparse.ArgumentParser(prog="python -m benchmarks", description=__doc__)
    parser.add_argument("--quick", action="store_true", help="few and short runs: are the answers the same?")
    parser.add_argument("--json", metavar="FILE", help="write the results")
    given = parser.parse_args(arguments)
    results = measure(QUICK if given.quick else FULL)
    print("\n".join(lines(results)))
    if given.json:
        Path(given.json).write_text(json.dumps(results, indent=1, allow_nan=False) + "\n", encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
