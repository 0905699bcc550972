"""On a Dask scheduler in real processes: the same table as at home, whatever happens to a worker."""

import importlib.util
import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator

import pytest

from drivers.sweep.cluster import ClusterError, _Feed
from drivers.sweep.plan import plan_of
from drivers.sweep.sweep_file import read_sweep
from tests.drivers.sweep.conftest import Folder, assert_gone

SAMPLES = 249 if os.environ.get("CARDPROOF_FULL") else 14
CASES = 2 * 2 * 2 * (SAMPLES + 1)

with_dask = pytest.mark.skipif(
    importlib.util.find_spec("distributed") is None, reason="the optional package distributed is not installed"
)

unclosed = pytest.mark.filterwarnings(  # files of its own that distributed leaves to the garbage collector
    "ignore:unclosed file:ResourceWarning", "ignore::pytest.PytestUnraisableExceptionWarning"
)


class Cluster:
    """A scheduler and worker processes without anything that would replace them."""

    def __init__(self, place) -> None:
        self.file, self.processes = place / "scheduler.json", []
        self.scheduler = self.start("scheduler", "--host", "127.0.0.1", "--port", "0")
        while not self.file.exists():
            assert self.scheduler.poll() is None
            time.sleep(0.02)

    def start(self, what: str, *options: str) -> subprocess.Popen:
        command = [sys.executable, "-m", f"distributed.cli.dask_{what}", "--no-dashboard", *options]
        nowhere = subprocess.DEVNULL
        process = subprocess.Popen(
            [*command, "--scheduler-file", str(self.file)], stdout=nowhere, stderr=nowhere, start_new_session=True
        )
        self.processes.append(process)
        return process

    def worker(self) -> subprocess.Popen:
        return self.start("worker", "--no-nanny", "--nthreads", "1")

    @property
    def address(self) -> str:
        return json.loads(self.file.read_text())["address"]

    def end(self) -> None:
        for process in self.processes:
            process.kill()
            process.wait()


@pytest.fixture
def cluster(tmp_path) -> Iterator[Cluster]:
    started = Cluster(tmp_path)
    yield started
    started.end()


@with_dask
def test_a_lost_worker_loses_nothing(folder, sweep, cluster):
    at_home: Folder = folder(samples=SAMPLES)
    workers = [cluster.worker(), cluster.worker()]
    assert sweep(at_home)[0] == 0  # while the workers start
    away: Folder = folder(samples=SAMPLES)
    process = away.start("--on", cluster.address)
    assert away.await_count(CASES // 2, process)
    workers[0].send_signal(signal.SIGKILL)
    out, err = process.communicate(timeout=600)
    assert (process.returncode, err) == (0, ""), out
    assert away.table() == at_home.table()
    assert {row[-1] for row in away.table().values()} == {1}
    assert len(away.table()) == CASES


@with_dask
def test_killed_or_without_its_scheduler_it_goes_on_where_it_was(folder, sweep, cluster):
    cluster.worker()
    place: Folder = folder(samples=SAMPLES)
    process = place.start("--on", cluster.address)
    assert place.await_count(CASES // 8, process)
    process.kill()
    process.communicate()
    assert_gone(process.pid)
    first = place.seconds()

    process = place.start("--on", cluster.address)
    assert place.await_count(len(first) + 1, process)
    cluster.scheduler.send_signal(signal.SIGKILL)
    out, err = process.communicate(timeout=60)
    assert (process.returncode, out, len(err.splitlines())) == (2, "", 1), err
    assert "the scheduler is lost" in err
    second = place.seconds()
    assert first.items() < second.items()

    assert sweep(place)[0] == 0  # at home: the cases are the same
    assert second.items() < place.seconds().items()
    assert {row[-1] for row in place.table().values()} == {1}
    assert len(place.table()) == CASES


@with_dask
@unclosed
@pytest.mark.parametrize("address", ["tcp://127.0.0.1:9", "nonsense://x:1", "127.0.0.1:port"])
def test_a_scheduler_that_does_not_answer_is_one_line(folder, sweep, monkeypatch, address):
    monkeypatch.setattr("drivers.sweep.cluster.PATIENCE", 0.5)
    status, out, err = sweep(folder(), "--on", address)
    assert (status, out, len(err.splitlines())) == (2, "", 1), err
    assert err.startswith(f"cardproof: --on {address}: the scheduler does not answer")


def test_without_the_package_it_says_what_to_install(folder, sweep, monkeypatch):
    monkeypatch.setitem(sys.modules, "distributed", None)
    status, out, err = sweep(folder(), "--on", "tcp://127.0.0.1:9")
    assert (status, out, len(err.splitlines())) == (2, "", 1), err
    assert "install cardproof[cluster]" in err


class FlakyFuture:
    """A chunk that was finished, and then lost with its worker before its result was fetched."""

    def __init__(self, work, states: list[str]) -> None:
        self.work, self.states = work, states

    @property
    def status(self) -> str:
        return self.states.pop(0) if len(self.states) > 1 else self.states[0]

    def result(self, timeout: float) -> list:
        if self.states[0] == "late":
            self.states.pop(0)
            raise TimeoutError
        return self.work()


class FlakyClient:
    loop, status = None, "running"

    def __init__(self, states: list[str]) -> None:
        self.states, self.submitted = states, 0

    def nthreads(self) -> dict[str, int]:
        return {"worker": 1}

    def submit(self, function, *given, pure: bool) -> FlakyFuture:
        self.submitted += 1
        return FlakyFuture(lambda: function(*given), list(self.states))


class Completed:
    def __init__(self, **_: object) -> None:
        self.futures: list[FlakyFuture] = []

    def add(self, future: FlakyFuture) -> None:
        self.futures.append(future)

    def __iter__(self):
        while self.futures:
            yield self.futures.pop(0)


@with_dask
@unclosed
@pytest.mark.parametrize("states", [["finished"], ["pending", "finished"], ["lost", "pending", "finished"]])
def test_a_result_that_is_lost_before_it_is_fetched_is_waited_for_again(folder, monkeypatch, states):
    monkeypatch.setattr("distributed.as_completed", Completed)
    plan = plan_of(read_sweep(folder(samples=2).file))
    cases, client = list(plan.cases()), FlakyClient(states)
    outcomes = list(_Feed(client, plan, cases, "tcp://x:1").outcomes())
    assert sorted(case.key for case, _ in outcomes) == sorted(case.key for case in cases)
    assert all(outcome.error is None for _, outcome in outcomes)
    assert client.submitted <= len(cases) // 2


@with_dask
@unclosed
def test_a_result_that_does_not_come_is_waited_for_again(folder, monkeypatch):
    monkeypatch.setattr("distributed.as_completed", Completed)
    plan = plan_of(read_sweep(folder().file))
    client = FlakyClient(["finished", "late", "finished"])
    assert len(list(_Feed(client, plan, list(plan.cases()), "tcp://x:1").outcomes())) == 8


@with_dask
@unclosed
def test_a_cancelled_chunk_ends_the_run(folder, monkeypatch):
    monkeypatch.setattr("distributed.as_completed", Completed)
    plan = plan_of(read_sweep(folder().file))
    with pytest.raises(ClusterError, match="the scheduler is lost"):
        list(_Feed(FlakyClient(["cancelled"]), plan, list(plan.cases()), "tcp://x:1").outcomes())
