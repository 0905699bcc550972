"""Run cases in local processes; what is lost with a process is run again in another."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections import Counter, deque
from collections.abc import Iterator, Sequence
from contextlib import contextmanager, suppress
from itertools import groupby
from multiprocessing.connection import Connection, wait
from multiprocessing.context import ForkProcess

from drivers.sweep.plan import Case, Plan
from drivers.sweep.run_case import CaseRunner, Outcome
from matlib.errors import CardproofError

__all__ = ["ProcessError", "problems", "run_locally"]

ATTEMPTS = 2
"""Processes that a case may cost; then it counts as failed."""

AHEAD = 2
"""Stretches that a process is given at once, lest it wait for the next."""

GRACE = 5.0
"""Seconds for a process to end when it is told to."""

Stretch = tuple[int, int]  # first case, and one past the last


class ProcessError(CardproofError, RuntimeError):
    """The system gives no process to run cases in."""

    def __init__(self, reason: str) -> None:
        super().__init__(reason)
        self.reason = reason

    def __str__(self) -> str:
        return f"no process to run cases in: {self.reason}; name fewer with --processes"


def problems(cases: Sequence[Case]) -> Iterator[Stretch]:
    """Stretches of cases that share material and path, and so their reference solution."""
    start = 0
    for _, group in groupby(cases, key=lambda case: case.problem):
        end = start + sum(1 for _ in group)
        yield start, end
        start = end


def run_locally(plan: Plan, cases: Sequence[Case], processes: int) -> Iterator[tuple[Case, Outcome]]:
    """Outcomes of cases as they are finished in `processes` processes.

    Parameters
    ----------
    plan : Plan
    cases : sequence of Case
    processes : int

    Yields
    ------
    case, outcome : Case, Outcome

    Raises
    ------
    ProcessError
        If no process can be started.

    Notes
    -----
    Processes take no part in writing results: one that is killed at any moment takes nothing but its case with it, which is run
    again. They end at once when this process ends, however it does.
    """
    crew = _Crew(plan, cases)
    try:
        yield from crew.outcomes(processes)
    finally:
        crew.end()


class _Worker:
    """A process, and the stretches of cases that it was given, the one that it is at first."""

    def __init__(self, process: ForkProcess, connection: Connection) -> None:
        self.process, self.connection = process, connection
        self.given: deque[Stretch] = deque()

    def take(self, stretch: Stretch) -> None:
        self.given.append(stretch)
        with suppress(OSError):  # it has died: its end of the connection will tell
            self.connection.send(stretch)

    def finish(self) -> int:
        """Count the case that it is at as done, and give its index."""
        at, end = self.given.popleft()
        if at + 1 < end:
            self.given.appendleft((at + 1, end))
        return at


class _Crew:
    """The processes of a run, what is left for them, and a pipe whose end is the sign for all to end."""

    def __init__(self, plan: Plan, cases: Sequence[Case]) -> None:
        self.plan, self.cases = plan, cases
        self.left = deque(problems(cases))
        self.lost: Counter[int] = Counter()
        self.workers: list[_Worker] = []
        self.sign, self.hold = os.pipe()

    def outcomes(self, processes: int) -> Iterator[tuple[Case, Outcome]]:
        for _ in range(min(processes, len(self.left))):
            self.start()
        while self.workers:
            ready = wait([worker.connection for worker in self.workers])
            for worker in [worker for worker in self.workers if worker.connection in ready]:
                try:
                    outcome = worker.connection.recv()
                except (EOFError, OSError):
                    yield from self.replace(worker)
                    continue
                yield self.cases[worker.finish()], outcome
                self.occupy(worker)

    def start(self) -> None:
        """Start a process."""
        context = multiprocessing.get_context("fork")
        ours, theirs = context.Pipe()
        process = context.Process(target=_work, args=(self.plan, self.cases, theirs, self.sign, self.hold), daemon=True)
        try:
            with _no_interrupt():
                process.start()
        except OSError as error:
            raise ProcessError(error.strerror or str(error)) from None
        finally:
            theirs.close()
        worker = _Worker(process, ours)
        self.workers.append(worker)
        self.occupy(worker)

    def occupy(self, worker: _Worker) -> None:
        """Give a process what it has to do next, and while there is plenty something to go on with; or let it go."""
        plenty = len(self.left) > AHEAD * len(self.workers)
        while self.left and len(worker.given) < (AHEAD if plenty else 1):
            worker.take(self.left.popleft())
        if not worker.given:
            self.dismiss(worker)

    def dismiss(self, worker: _Worker) -> None:
        self.workers.remove(worker)
        with suppress(OSError):
            worker.connection.send(None)
        worker.connection.close()
        worker.process.join(GRACE)
        worker.process.kill()
        worker.process.join()

    def replace(self, worker: _Worker) -> Iterator[tuple[Case, Outcome]]:
        """Put back what a process that died was at; a case that costs too many of them has failed."""
        self.dismiss(worker)
        code = worker.process.exitcode or 0
        at, _ = worker.given[0]
        self.lost[at] += 1
        if self.lost[at] >= ATTEMPTS:
            how = f"killed by signal {-code}" if code < 0 else f"exit status {code}"
            yield self.cases[worker.finish()], Outcome(error=f"its process was lost {ATTEMPTS} times ({how})")
        self.left.extendleft(reversed(worker.given))
        if self.left:
            self.start()

    def end(self) -> None:
        os.close(self.hold)
        for worker in list(self.workers):
            self.dismiss(worker)
        os.close(self.sign)


@contextmanager
def _no_interrupt() -> Iterator[None]:
    """Keep an interrupt from the keyboard for later; a process started inside never gets one."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _work(plan: Plan, cases: Sequence[Case], connection: Connection, sign: int, hold: int) -> None:
    """Run the stretches that are asked for, until nobody asks."""
    os.close(hold)
    threading.Thread(target=_end_with, args=(sign,), daemon=True).start()
    runner = CaseRunner(plan)
    while (stretch := connection.recv()) is not None:
        for index in range(*stretch):
            connection.send(runner.run(cases[index]))


def _end_with(sign: int) -> None:
    """End this process when the one that started it has ended, or wants it to."""
    os.read(sign, 1)
    os._exit(1)
