"""Run cases on a Dask scheduler: the same cases, in chunks; a lost worker loses nothing."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

from drivers.sweep.local import run_planned
from drivers.sweep.plan import Case, Plan
from drivers.sweep.run_case import Outcome
from drivers.sweep.store import Store
from matlib.errors import CardproofError

__all__ = ["ClusterError", "run_on_cluster"]

CHUNK = 16
"""Cases of one task: some tenths of a second to seconds of work, against milliseconds of scheduling."""

RETRIES = 10
PATIENCE = "20s"


class ClusterError(CardproofError, RuntimeError):
    """The scheduler cannot be used."""

    def __init__(self, address: str, reason: str) -> None:
        super().__init__(address, reason)
        self.address, self.reason = address, reason

    def __str__(self) -> str:
        return f"--on {self.address}: {self.reason}"


def _chunks(cases: Sequence[Case], workers: int) -> Iterator[Sequence[Case]]:
    """Chunks of at most `CHUNK` cases, small enough that every worker has several."""
    size = max(1, min(CHUNK, len(cases) // (4 * max(1, workers)) or 1))
    for start in range(0, len(cases), size):
        yield cases[start : start + size]


def run_chunk(plan: Plan, cases: Sequence[Case]) -> list[Outcome]:
    """Outcomes of some cases, in order; runs on a worker."""
    return [run_planned(plan, case) for case in cases]


def run_on_cluster(
    plan: Plan, cases: Sequence[Case], store: Store, address: str, progress: Callable[[int], None] | None
) -> None:
    """Run cases on the scheduler at `address`; results are committed here as they come.

    Raises
    ------
    ClusterError
        If `distributed` is not installed or the scheduler does not answer.
    """
    try:
        from distributed import Client, as_completed
    except ImportError:
        raise ClusterError(address, "the package distributed is not installed; install cardproof[cluster]") from None
    try:
        client = Client(address, timeout=PATIENCE)
    except (OSError, ValueError) as error:
        raise ClusterError(address, f"the scheduler does not answer ({error})") from None
    with client:
        shared = client.scatter(plan, broadcast=False)
        workers = len(client.scheduler_info()["workers"])
        chunks = {}
        futures = []
        for chunk in _chunks(cases, workers):
            future = client.submit(run_chunk, shared, chunk, retries=RETRIES, pure=False)
            chunks[future.key] = chunk
            futures.append(future)
        for future in as_completed(futures):
            chunk = chunks[future.key]
            for case, outcome in zip(chunk, future.result(), strict=True):
                store.add(case, outcome)
            if progress is not None:
                progress(len(chunk))
