"""Run what is left of a sweep, and sum up its results."""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from contextlib import closing
from dataclasses import dataclass
from typing import Any

from drivers.sweep.local import run_locally
from drivers.sweep.plan import Case, Plan
from drivers.sweep.run_case import Outcome
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
        If the database is no database of a sweep, or cannot be written.
    BusyError
        If another sweep is writing to it.
    ProcessError
        If no local process can be started.
    ClusterError
        If the scheduler cannot be used.

    Notes
    -----
    Outcomes are written here alone, each committed when it arrives: whatever is killed, no finished case is lost, and a worker
    takes nothing with it but the case that it was at.
    """
    with Store(plan.sweep.database) as store:
        cases = list(plan.cases())
        done = store.finished(failed_too=not retry_failed)
        left = [case for case in cases if case.key not in done]
        new = len(cases) - len(left)  # told with the first outcome: processes are started before anything is drawn
        with closing(_outcomes(plan, left, processes, on)) as outcomes:
            for case, outcome in outcomes:
                store.add(case, outcome)
                if progress is not None:
                    progress(new + 1)
                new = 0
        rows = tuple(store.rows([case.key for case in cases]))
    return SweepResult(plan=plan, rows=rows, ran=len(left))


def _outcomes(
    plan: Plan, left: Sequence[Case], processes: int, on: str | None
) -> Generator[tuple[Case, Outcome], None, None]:
    if left and on is not None:
        from drivers.sweep.cluster import run_on_cluster

        yield from run_on_cluster(plan, left, on)
    elif left:
        yield from run_locally(plan, left, processes)
