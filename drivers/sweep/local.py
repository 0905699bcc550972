"""Run cases in local processes; each commits what it finishes."""

from __future__ import annotations

import multiprocessing
import os
import signal
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

from drivers.sweep.plan import Case, Plan
from drivers.sweep.run_case import Outcome, run_case
from drivers.sweep.store import Store
from matlib.errors import CardproofError

__all__ = ["run_locally"]


def run_locally(
    plan: Plan, cases: Sequence[Case], database: Path, processes: int, progress: Callable[[int], None] | None
) -> None:
    """Run cases in `processes` processes.

    Parameters
    ----------
    plan : Plan
    cases : sequence of Case
    database : Path
        Each process commits a case when it is finished: whatever is killed, no finished case is lost.
    processes : int
    progress : callable or None
        Called with the number of cases finished since the last call.
    """
    context = multiprocessing.get_context("fork")
    counter = context.Value("q", 0)
    finished = context.Value("q", 0)
    parent = os.getpid()
    workers = [
        context.Process(target=_work, args=(plan, cases, database, counter, finished, parent), daemon=True)
        for _ in range(min(processes, len(cases)))
    ]
    for worker in workers:
        worker.start()
    try:
        told = 0
        while any(worker.is_alive() for worker in workers):
            for worker in workers:
                worker.join(timeout=0.1)
            if progress is not None and finished.value > told:
                progress(finished.value - told)
                told = finished.value
    finally:
        for worker in workers:
            worker.terminate()
            worker.join()


def _work(plan: Plan, cases: Sequence[Case], database: Path, counter: Any, finished: Any, parent: int) -> None:
    """Take the next case until there is none, or the parent is gone."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    store = Store(database)
    while os.getppid() == parent:
        with counter.get_lock():
            index = counter.value
            counter.value += 1
        if index >= len(cases):
            break
        case = cases[index]
        store.add(case, run_planned(plan, case))
        with finished.get_lock():
            finished.value += 1
    store.close()


def run_planned(plan: Plan, case: Case) -> Outcome:
    """Outcome of a case of a plan, a sample that cannot be drawn included."""
    try:
        material = plan.material(case)
    except CardproofError as error:
        return Outcome(key=case.key, error=" ".join(str(error).split()))
    return run_case(case.key, material, plan.path(case), case.rule)
