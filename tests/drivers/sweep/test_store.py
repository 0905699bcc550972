"""The database: one sweep at a time, nothing else's file, and a full disk ends with one line."""

import fcntl
import resource
import signal
import sqlite3
import subprocess
import sys
import time
from contextlib import closing

import pytest

from drivers.sweep.plan import plan_of
from drivers.sweep.run_case import Outcome
from drivers.sweep.store import Store
from drivers.sweep.sweep_file import read_sweep
from matlib.errors import FileError


def assert_refused(result, *parts: str) -> None:
    status, out, err = result
    assert (status, out, len(err.splitlines())) == (2, "", 1), err
    for part in parts:
        assert part in err


@pytest.mark.parametrize("content", [b"time,stress\n" * 1000, b"SQLite format 3\0" + b"\x7f" * 9000])
def test_a_database_that_is_another_file_is_left_as_it_is(folder, sweep, content):
    place = folder()
    place.database.write_bytes(content)
    assert_refused(sweep(place), f"{place.database}: database: found ", "a sweep")
    assert place.database.read_bytes() == content
    assert not list(place.place.glob("*.lock"))


def test_a_database_of_another_program_is_left_as_it_is(folder, sweep):
    place = folder()
    with closing(sqlite3.connect(place.database)) as connection:
        connection.execute("CREATE TABLE cases (key TEXT PRIMARY KEY, what TEXT)")
    content = place.database.read_bytes()
    assert_refused(sweep(place), "an SQLite file of something else")
    assert place.database.read_bytes() == content


def test_a_damaged_database_is_one_line(folder, sweep):
    place = folder(samples=14)
    assert sweep(place)[0] == 0
    content = bytearray(place.database.read_bytes())
    for page in range(4096, len(content), 4096):
        content[page : page + 200] = b"\xff" * 200
    place.database.write_bytes(bytes(content))
    assert_refused(sweep(place), f"{place.database}: database: found ", "malformed")


def test_an_empty_file_is_a_database_to_come(folder, sweep):
    place = folder()
    place.database.touch()
    assert sweep(place)[0] == 0
    assert place.count() == 8


def test_a_folder_that_cannot_be_written_is_one_line(folder, sweep, tmp_path):
    place = folder()
    place.file.write_text(place.file.read_text() + '[output]\ndatabase = "/proc/self/x.sqlite"\n')
    assert_refused(sweep(place), "/proc/self/x.sqlite: database: found ", "a folder that can be written")


def test_a_database_that_is_a_folder_is_one_line(folder, sweep):
    place = folder()
    place.database.mkdir()
    assert_refused(sweep(place), "unable to open database file")


def test_two_sweeps_on_one_database_are_refused(folder, sweep):
    place = folder()
    script = f"""
import sys, time
from pathlib import Path
from drivers.sweep.store import Store
with Store(Path({str(place.database)!r})):
    print("held", flush=True)
    sys.stdin.read()
"""
    with subprocess.Popen(
        [sys.executable, "-c", script], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    ) as other:
        assert other.stdout.readline() == "held\n"
        assert_refused(sweep(place), "another sweep is writing to it")
        assert place.count() == 0
        other.communicate("", timeout=60)
    assert sweep(place)[0] == 0


def test_a_lock_file_that_was_left_behind_holds_nobody_up(folder, sweep):
    place = folder()
    place.database.with_name("sweep.sqlite.lock").write_text("")
    assert sweep(place)[0] == 0
    assert not list(place.place.glob("*.lock"))


def test_whoever_waited_for_a_lock_file_that_is_gone_takes_a_new_one(folder, tmp_path):
    name = tmp_path / "x.sqlite.lock"
    with open(name, "wb") as old:
        fcntl.lockf(old, fcntl.LOCK_EX)
        name.unlink()
        with Store(tmp_path / "x.sqlite"):
            assert name.exists()
    assert not name.exists()


def test_a_full_disk_ends_with_one_line_and_can_be_resumed(folder, sweep):
    place = folder(samples=14)

    def limited() -> None:  # a file that may not grow: what a full disk is to the database
        resource.setrlimit(resource.RLIMIT_FSIZE, (150_000, 150_000))
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)

    command = [sys.executable, "-m", "drivers.cli", "sweep", str(place.file)]
    run = subprocess.run(command, preexec_fn=limited, capture_output=True, text=True, timeout=300)
    assert_refused((run.returncode, run.stdout, run.stderr), f"{place.database}: database: found ")
    before = place.seconds()
    assert 0 < len(before) < 8 * 15
    status, _, err = sweep(place)
    assert (status, err) == (0, "")
    assert before.items() < place.seconds().items()
    assert {row[-1] for row in place.table().values()} == {1}


def test_sqlite_says_that_the_disk_is_full_and_so_do_we(folder):
    place = folder(samples=100)
    cases = list(plan_of(read_sweep(place.file)).cases())
    with Store(place.database) as store:
        pages = store._connection.execute("PRAGMA page_count").fetchone()[0]
        store._connection.execute(f"PRAGMA max_page_count = {pages + 2}")
        with pytest.raises(FileError, match="database or disk is full"):
            for case in cases:
                store.add(case, Outcome(error="x" * 100))


def test_a_second_outcome_replaces_the_first_and_is_counted(folder):
    place = folder()
    case = next(plan_of(read_sweep(place.file)).cases())
    with Store(place.database) as store:
        store.add(case, Outcome(error="no"))
        assert (store.finished(), store.finished(failed_too=False)) == ({case.key}, set())
        store.add(case, Outcome(peak_stress=1.0))
        (row,) = store.rows([case.key, "unknown"])
    assert (row["error"], row["peak_stress"], row["computed"]) == (None, 1.0, 2)


def test_many_results_are_looked_through_within_seconds(folder):
    place = folder(samples=2_499)
    cases = list(plan_of(read_sweep(place.file)).cases())
    with Store(place.database) as store:
        store._connection.execute("BEGIN")
        for case in cases:
            store.add(case, Outcome(peak_stress=1.0, relative_error=0.0, reference_bound=0.0))
        store._connection.execute("COMMIT")
        started = time.process_time()
        assert len(store.finished()) == 20_000
        assert [row["sample"] for row in store.rows([case.key for case in cases[:5]])] == [0, 0, 1, 1, 2]
        assert time.process_time() - started < 5.0  # a tenth of a second on a desk machine
