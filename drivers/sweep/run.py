"""Run what is left of a sweep, and sum up its results."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from drivers.sweep.local import run_locally
from drivers.sweep.plan import Case, Plan
from drivers.sweep.store import Store

__all__ = ["SweepResult", "run_sweep"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class SweepResult:
    """Results of all cases of a plan.

    Parameters
    ----------
    plan : Plan
    rows : tuple of dict
        One a case, in the order of the plan.
    ran : int
        Cases that were run now; the rest was there.
    """

    plan: Plan
    rows: tuple[dict[str, Any], ...]
    ran: int

    @property
    def failed(self) -> list[dict[str, Any]]:
        """Cases that gave no response."""
        return [row for row in self.rows if row["error"] is not None]

    @property
    def beyond(self) -> list[dict[str, Any]]:
        """Cases whose error, the reference solution's bound allowed for, is above the tolerance; the worst first."""
        tolerance = self.plan.sweep.tolerance
        over = [
            row
            for row in self.rows
            if row["error"] is None and row["relative_error"] + row["reference_bound"] > tolerance
        ]
        return sorted(over, key=lambda row: -row["relative_error"])

    @property
    def holds(self) -> bool:
        """Whether every case ran and is within the tolerance."""
        return len(self.rows) == len(self.plan) and not self.failed and not self.beyond


def run_sweep(
    plan: Plan,
    *,
    processes: int,
    on: str | None = None,
    retry_failed: bool = False,
    progress: Callable[[int], None] | None = None,
) -> SweepResult:
    """Run every case that has no result yet.

    Parameters
    ----------
    plan : Plan
    processes : int
        Local processes.
    on : str, optional
        Address of a Dask scheduler, to run there instead.
    retry_failed : bool, optional
        Run failed cases again.
    progress : callable, optional
        Called with the number of cases finished since the last call, those that were there already included.

    Raises
    ------
    FileError
        If the database is no database of a sweep.
    BusyError
        If another sweep is writing to it.
    ClusterError
        If the scheduler cannot be used.
    """
    store = Store(plan.sweep.database)
    try:
        with store.owned():
            cases = list(plan.cases())
            left = _left(store, cases, retry_failed)
            if progress is not None:
                progress(len(cases) - len(left))
            if left and on is not None:
                from drivers.sweep.cluster import run_on_cluster

                run_on_cluster(plan, left, store, on, progress)
            elif left:
                store.close()  # a connection must not be carried into other processes
                run_locally(plan, left, plan.sweep.database, processes, progress)
                store = Store(plan.sweep.database)
            rows = tuple(store.rows([case.key for case in cases]))
    finally:
        store.close()
    return SweepResult(plan=plan, rows=rows, ran=len(left))


def _left(store: Store, cases: Sequence[Case], retry_failed: bool) -> list[Case]:
    done = store.finished(failed_too=not retry_failed)
    return [case for case in cases if case.key not in done]
