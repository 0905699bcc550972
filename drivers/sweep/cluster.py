"""Run cases on a Dask scheduler: the same cases, in chunks; a lost worker loses nothing."""

from __future__ import annotations

import asyncio
import logging
import time
import warnings
from collections import deque
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from drivers.sweep.local import problems
from drivers.sweep.plan import Case, Plan
from drivers.sweep.run_case import CaseRunner, Outcome
from matlib.errors import CardproofError
from matlib.version import __version__

if TYPE_CHECKING:
    from distributed import Client

__all__ = ["ClusterError", "run_on_cluster"]

CHUNK_SECONDS = 1.0
"""Work of a chunk to aim at, against the milliseconds that a scheduler takes for one."""

LARGEST_CHUNK = 512
WAITING = 2
"""Chunks that wait for each thread of a worker, beside the one that it is at."""

PATIENCE = 20.0
"""Seconds for the scheduler to answer, and for its first worker to be there."""

COUNT_AGAIN = 5.0
"""Seconds after which the workers are counted again."""

LOST = "the scheduler is lost; start the sweep again when it is back"

Chunk = list[Case]


class ClusterError(CardproofError, RuntimeError):
    """The scheduler or its workers cannot be used."""

    def __init__(self, address: str, reason: str) -> None:
        super().__init__(address, reason)
        self.address, self.reason = address, " ".join(reason.split())

    def __str__(self) -> str:
        return f"--on {self.address}: {self.reason}"


def run_chunk(version: str, plan: Plan, cases: Sequence[Case]) -> list[Outcome]:
    """Outcomes of some cases, in order; runs on a worker."""
    if version != __version__:
        raise RuntimeError(f"it has cardproof {__version__}, this is {version}")
    runner = CaseRunner(plan)
    return [runner.run(case) for case in cases]


def run_on_cluster(plan: Plan, cases: Sequence[Case], address: str) -> Iterator[tuple[Case, Outcome]]:
    """Outcomes of cases as chunks of them are finished by the workers of a scheduler.

    Parameters
    ----------
    plan : Plan
    cases : sequence of Case
    address : str
        Such as ``tcp://host:8786``.

    Yields
    ------
    case, outcome : Case, Outcome

    Raises
    ------
    ClusterError
        If `distributed` is not installed, the scheduler does not answer or goes away, it has no workers, or these cannot run
        cases.

    Notes
    -----
    Each chunk carries what it needs, so that no worker holds anything that another one depends on. A chunk whose worker is lost is
    run by another. One that takes several workers with it is run again case by case, and the case that does so has failed.
    """
    with _quiet(), _client(address) as client:
        yield from _Feed(client, plan, cases, address).outcomes()


class _Feed:
    """What is left, cut into chunks as workers need them."""

    def __init__(self, client: Client, plan: Plan, cases: Sequence[Case], address: str) -> None:
        self.client, self.plan, self.cases, self.address = client, plan, cases, address
        self.left = deque(problems(cases))
        self.pending: dict[Any, Chunk] = {}
        self.seconds, self.finished = 0.0, 0
        self.threads, self.counted = 1, -COUNT_AGAIN

    def outcomes(self) -> Iterator[tuple[Case, Outcome]]:
        from distributed import as_completed

        completed = as_completed(loop=self.client.loop, raise_errors=False)
        self.fill(completed)
        for future in completed:
            chunk, status = self.pending.pop(future), future.status
            outcomes = self.result(future) if status == "finished" else None
            if outcomes is not None:
                self.seconds += sum(outcome.seconds for outcome in outcomes)
                self.finished += len(outcomes)
                yield from zip(chunk, outcomes, strict=True)
            elif status == "error":
                yield from self.failed(future, chunk, completed)
            elif status == "cancelled" or self.client.status != "running":
                raise ClusterError(self.address, LOST)
            else:  # it was finished, and lost with its worker before it was here; the scheduler has it run again
                self.watch(future, chunk, completed)
            self.fill(completed)

    def fill(self, completed: Any) -> None:
        """Keep every thread of every worker supplied."""
        if time.monotonic() - self.counted > COUNT_AGAIN:
            with self.told():
                self.threads = max(1, sum(self.client.nthreads().values()))
            self.counted = time.monotonic()
        while self.left and len(self.pending) < (1 + WAITING) * self.threads:
            self.submit(self.next_chunk(), completed)

    def next_chunk(self) -> Chunk:
        """As many cases as take about `CHUNK_SECONDS`, fewer towards the end; cases of one material and path stay together."""
        size = 1.0
        if self.finished:
            size = min(CHUNK_SECONDS * self.finished / max(self.seconds, 1e-9), LARGEST_CHUNK)
        remaining = len(self.cases) - self.left[0][0]
        size = min(size, remaining / (2 * self.threads))
        start, end = self.left.popleft()
        while self.left and self.left[0][1] - start <= size:
            _, end = self.left.popleft()
        return list(self.cases[start:end])

    def submit(self, chunk: Chunk, completed: Any) -> None:
        with self.told():
            future = self.client.submit(run_chunk, __version__, self.plan.part(chunk), chunk, pure=False)
        self.watch(future, chunk, completed)

    def watch(self, future: Any, chunk: Chunk, completed: Any) -> None:
        self.pending[future] = chunk
        completed.add(future)

    def failed(self, future: Any, chunk: Chunk, completed: Any) -> Iterator[tuple[Case, Outcome]]:
        """Run a chunk that workers died of case by case; anything else ends the run."""
        from distributed.scheduler import KilledWorker

        error = self.error(future)
        if not isinstance(error, KilledWorker):
            raise ClusterError(self.address, f"a worker cannot run cases: {error}")
        if len(chunk) == 1:
            yield chunk[0], Outcome(error="the workers that ran it were lost")
            return
        for case in chunk:
            self.submit([case], completed)

    def result(self, future: Any) -> list[Outcome] | None:
        """What a chunk gave; None where its worker is lost before it has said."""
        from distributed import TimeoutError as Late
        from distributed.scheduler import KilledWorker

        with self.told():
            try:
                outcomes: list[Outcome] = future.result(timeout=PATIENCE)
            except (TimeoutError, Late, KilledWorker):
                return None
            return outcomes

    def error(self, future: Any) -> BaseException:
        with self.told():
            found: BaseException = future.exception(timeout=PATIENCE)
            return found

    @contextmanager
    def told(self) -> Iterator[None]:
        """Whatever the connection to the scheduler raises ends the run with one line."""
        try:
            yield
        except (asyncio.CancelledError, OSError, RuntimeError, TimeoutError) as error:
            raise ClusterError(self.address, f"{LOST} ({type(error).__name__}: {error})") from None


@contextmanager
def _client(address: str) -> Iterator[Client]:
    try:
        from distributed import Client
    except ImportError:
        raise ClusterError(address, "the package distributed is not installed; install cardproof[cluster]") from None
    try:
        asyncio.run(_knock(address))
        client = Client(address, timeout=PATIENCE, set_as_default=False)
    except (OSError, ValueError, RuntimeError) as error:
        raise ClusterError(address, f"the scheduler does not answer ({error})") from None
    with client:
        try:
            client.wait_for_workers(1, timeout=PATIENCE)
        except TimeoutError:
            raise ClusterError(address, f"the scheduler has no worker after {PATIENCE:g} s") from None
        yield client


async def _knock(address: str) -> None:
    """Connect once, and leave: a client that found nobody would keep its thread, and might wait for itself when collected."""
    from distributed.comm import connect

    comm = await connect(address, timeout=PATIENCE)
    await comm.close()


@contextmanager
def _quiet() -> Iterator[None]:
    """Nothing on the terminal but what this program says; `distributed` gives each of its loggers a level of its own."""
    before = logging.root.manager.disable
    logging.disable(logging.CRITICAL)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield
    finally:
        logging.disable(before)
