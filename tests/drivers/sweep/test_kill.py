"""Killed and resumed: the same table, nothing computed twice. ``CARDPROOF_FULL=1`` runs 2000 cases and ten kills."""

import os
import random
import signal

import pytest

from tests.drivers.sweep.conftest import assert_gone, kill, members

SAMPLES, KILLS, AT_LEAST = (249, 10, 10) if os.environ.get("CARDPROOF_FULL") else (14, 3, 1)
CASES = 2 * 2 * 2 * (SAMPLES + 1)


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory):
    """The table of a run that nothing happens to."""
    from tests.drivers.sweep.conftest import Folder

    folder = Folder(tmp_path_factory.mktemp("undisturbed") / "f", samples=SAMPLES)
    status, out, err = folder.run("--processes", "2")
    assert (status, err) == (0, ""), out
    assert f"{CASES} cases, {CASES} of them run now" in " ".join(out.split())
    return folder.table()


def test_killed_at_random_and_resumed_it_ends_with_the_same_table_and_computes_nothing_twice(
    folder, sweep, undisturbed
):
    chance, place, killed = random.Random(5), folder(samples=SAMPLES), 0
    earlier: dict[str, float] = {}
    for k in range(KILLS):
        process = place.start("--processes", "2")
        share = (k + chance.random()) / (KILLS + 2)  # the last part is left, so that there is always one to kill
        if place.await_count(int(share * CASES), process):
            kill(process, group=k % 2 == 1)
            killed += 1
        assert_gone(process.pid)
        before = place.seconds()
        assert set(place.table().items()) <= set(undisturbed.items())  # a damaged or a half-written row would differ
        assert earlier.items() <= before.items()  # what was committed is as it was
        earlier = before
    assert killed >= AT_LEAST  # with few cases a machine that stalls may miss some
    status, out, err = sweep(place)
    assert (status, err) == (0, "")
    assert f"{CASES - len(earlier)} of them run now" in " ".join(out.split())
    assert earlier.items() <= place.seconds().items()
    assert place.table() == undisturbed
    assert {row[-1] for row in undisturbed.values()} == {1}


def test_a_worker_that_is_killed_takes_nothing_with_it(folder, undisturbed):
    place = folder(samples=SAMPLES)
    process = place.start("--processes", "2")
    assert place.await_count(CASES // 4, process)
    for worker in members(process.pid):
        if worker != process.pid:
            os.kill(worker, signal.SIGKILL)
    out, err = process.communicate(timeout=600)
    assert (process.returncode, err) == (0, ""), out
    assert place.table() == undisturbed


def test_interrupted_it_says_so_and_can_be_resumed(folder, sweep, undisturbed):
    place = folder(samples=SAMPLES)
    process = place.start("--processes", "2")
    assert place.await_count(CASES // 4, process)
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: to the workers as well
    _, err = process.communicate(timeout=60)
    assert (process.returncode, err) == (130, "cardproof: interrupted\n")
    assert_gone(process.pid)
    assert sorted(file.name for file in place.place.iterdir() if "sqlite" in file.name) == ["sweep.sqlite"]
    assert place.count() < CASES
    assert sweep(place)[0] == 0
    assert place.table() == undisturbed
