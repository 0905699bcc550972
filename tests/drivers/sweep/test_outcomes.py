"""What a sweep says: verdict, failures, tables for other programs, progress."""

import csv
import importlib.util
import io
import json
import os
import pty
import re
import signal
import subprocess
import sys

import pytest

from drivers.point import drive
from drivers.sweep import local
from drivers.sweep.plan import plan_of
from drivers.sweep.run import run_sweep
from drivers.sweep.run_case import CaseRunner
from drivers.sweep.store import COLUMNS
from drivers.sweep.sweep_file import read_sweep
from tests.drivers.files import CARD

LOW = CARD.replace("T_ref = 80.0", "T_ref = 150.0").replace("measured = [60.0, 130.0]\n", "")  # its pole is at 89 degC


def crossing(folder, **changes):
    """A sweep in which the path crosses the pole of one of three cards."""
    place = folder(**changes)
    (place.place / "cards" / "low.card.toml").write_text(LOW)
    return place


def test_a_sweep_within_the_tolerance_holds_and_is_not_run_again(folder, sweep):
    place = folder(samples=1)
    status, out, err = sweep(place, "--json", "-")
    data = json.loads(out)
    assert (status, err) == (0, "")
    assert (data["command"], data["verdict"], data["name"]) == ("sweep", "holds", "library [x]")
    assert (data["cases"], data["ran"], data["failed"], data["beyond_tolerance"]) == (16, 16, 0, 0)
    again = json.loads(sweep(place, "--json", "-")[1])
    assert again | {"ran": 16} == data
    assert again["ran"] == 0


def test_errors_beyond_the_tolerance_fall_short(folder, sweep):
    place = folder()
    place.file.write_text(place.file.read_text().replace("tolerance = 0.05", "tolerance = 0.002"))
    status, out, _ = sweep(place, "--json", "-")
    data = json.loads(out)
    assert (status, data["verdict"]) == (1, "falls short")
    worst = [case["relative_error"] for case in data["worst"]]
    assert worst == sorted(worst, reverse=True)
    assert data["beyond_tolerance"] == sum(error > 0.002 for error in worst) > 0


def test_the_error_of_a_case_is_the_one_that_the_reference_solution_shows(folder, sweep):
    from drivers.difference import largest_difference
    from drivers.reference import solve

    place = folder()
    sweep(place)
    plan = plan_of(read_sweep(place.file))
    table = place.table()
    for case in plan.cases():
        material, path = plan.entries[case.card].card.material(), plan.path(case)
        sharp = solve(material, path, accuracy=1e-8)
        expected = largest_difference(sharp.history, drive(case.rule.routine(material), path)).relative
        # the sweep's own reference solution is good to its bound, 1e-6 of the peak
        found, bound = table[case.key][7], table[case.key][8]
        assert bound <= 1e-6
        assert abs(found - expected) <= bound + sharp.relative_bound


def test_a_failed_case_is_recorded_with_its_error_and_the_rest_goes_on(folder, sweep):
    place = crossing(folder)
    status, out, err = sweep(place, "--json", "-")
    data = json.loads(out)
    assert (status, err, data["cases"], data["failed"]) == (1, "", 12, 4)
    assert all(case["card"] == "cards/low.card.toml" and "pole T_inf" in case["error"] for case in data["failures"])
    assert all(case["relative_error"] is None for case in data["failures"])
    status, out, _ = sweep(place)
    assert status == 1
    assert "4 failed" in out
    assert json.loads(sweep(place, "--json", "-")[1])["ran"] == 0


def test_failed_cases_alone_are_run_again_on_demand(folder, sweep):
    place = crossing(folder)
    sweep(place)
    status, out, _ = sweep(place, "--retry-failed", "--json", "-")
    assert (status, json.loads(out)["ran"]) == (1, 4)
    assert {(row[-2] is not None, row[-1]) for row in place.table().values()} == {(True, 2), (False, 1)}


def test_a_sampled_constant_that_is_no_material_fails_alone(folder, sweep):
    place = folder(samples=2, deviation='"elastic.nu" = 1e6')
    status, out, _ = sweep(place, "--json", "-")
    data = json.loads(out)
    assert (status, data["cases"], data["failed"]) == (1, 24, 16)
    assert "50 draws were no material" in data["failures"][0]["error"]
    assert [case["sample"] for case in data["failures"]] == [1, 1, 2, 2, 1, 1, 2, 2, 1, 1]


def test_a_mistake_of_ours_is_recorded_with_its_place(folder, monkeypatch):
    plan = plan_of(read_sweep(folder().file))

    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError("of all things")

    monkeypatch.setattr("drivers.sweep.run_case.solve", broken)
    outcome = CaseRunner(plan).run(next(plan.cases()))
    assert outcome.error is not None
    assert re.fullmatch(r"ZeroDivisionError: of all things \(in broken, line \d+\)", outcome.error)


def test_a_case_that_costs_two_processes_has_failed_and_the_rest_goes_on(folder, monkeypatch):
    place = folder()
    run = CaseRunner.run

    def deadly(self, case):
        if case.card.startswith("cards/a") and case.rule.shift_rule == "middle":
            os.kill(os.getpid(), signal.SIGKILL)
        return run(self, case)

    monkeypatch.setattr(local.CaseRunner, "run", deadly)
    result = run_sweep(plan_of(read_sweep(place.file)), processes=2)
    assert [(row["card"], row["shift_rule"], row["error"]) for row in result.failed] == [
        ("cards/a.card.toml", "middle", "its process was lost 2 times (killed by signal 9)")
    ] * 2
    assert len(result.rows) == 8
    assert {row["computed"] for row in result.rows} == {1}
    monkeypatch.undo()
    assert run_sweep(plan_of(read_sweep(place.file)), processes=2, retry_failed=True).holds


def test_no_process_at_all_is_one_line(folder, sweep, monkeypatch):
    def refused(*_: object) -> None:
        raise OSError(11, "Resource temporarily unavailable")

    monkeypatch.setattr("multiprocessing.context.ForkProcess.start", refused)
    status, out, err = sweep(folder())
    assert (status, out, len(err.splitlines())) == (2, "", 1)
    assert err.startswith("cardproof: no process to run cases in: Resource temporarily unavailable")


def test_processes_are_forked_after_compiled_kernels_were_used(folder):
    plan = plan_of(read_sweep(folder().file))
    first = next(plan.cases())
    drive(first.rule.routine(plan.material(first.card, 0)), plan.path(first))
    assert run_sweep(plan, processes=3).holds


def test_a_card_that_changes_is_run_again_and_the_others_are_not(folder, sweep):
    place = folder()
    sweep(place)
    card = place.place / "cards" / "a.card.toml"
    card.write_text(CARD.replace("C1 = 14.2", "C1 = 14.3"))
    data = json.loads(sweep(place, "--json", "-")[1])
    assert (data["cases"], data["ran"]) == (8, 4)
    assert place.count() == 12  # what the card was before is kept


def test_csv_has_a_row_for_every_case_in_the_order_of_the_plan(folder, sweep):
    place = crossing(folder)
    file = place.place / "r.csv"
    sweep(place, "--csv", str(file))
    rows = list(csv.DictReader(io.StringIO(file.read_text())))
    assert tuple(rows[0]) == COLUMNS[1:]
    assert [row["card"] for row in rows] == ["cards/a.card.toml"] * 4 + ["cards/b.card.toml"] * 4 + [
        "cards/low.card.toml"
    ] * 4
    assert [row["relative_error"] == "" for row in rows] == [row["error"] != "" for row in rows]
    stored = {row[:5]: row[5] for row in place.table().values()}
    for row in rows[:8]:
        name = (row["card"], row["path"], row["shift_rule"], row["recursion"], int(row["sample"]))
        assert float(row["peak_stress"]) == stored[name]


@pytest.mark.skipif(importlib.util.find_spec("pyarrow") is None, reason="the optional package pyarrow is not installed")
def test_parquet_says_the_same_as_csv(folder, sweep):
    import pyarrow.parquet as parquet

    place = crossing(folder)
    sweep(place, "--csv", str(place.place / "r.csv"), "--parquet", str(place.place / "r.parquet"))
    table = parquet.read_table(place.place / "r.parquet")
    rows = list(csv.DictReader(io.StringIO((place.place / "r.csv").read_text())))
    assert table.column_names == list(rows[0])
    types = {name: str(table.schema.field(name).type) for name in table.column_names}
    assert (types["card"], types["sample"], types["peak_stress"], types["estimated"]) == (
        *("string", "int64", "double"),
        "bool",
    )
    for name in ("card", "relative_error", "increments", "error"):
        kind = {"increments": int, "relative_error": float}.get(name, str)
        assert table.column(name).to_pylist() == [kind(row[name]) if row[name] else None for row in rows]


def test_without_pyarrow_parquet_is_refused_before_any_work(folder, sweep, monkeypatch):
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    place = folder()
    status, out, err = sweep(place, "--parquet", str(place.place / "r.parquet"))
    assert (status, out, len(err.splitlines())) == (2, "", 1)
    assert "install cardproof[parquet]" in err
    assert not place.database.exists()


@pytest.mark.parametrize("option", ["--csv", "--json"])
@pytest.mark.parametrize("name", ["sweep.sqlite", "s.sweep.toml", "cards/a.card.toml", "p.path.toml"])
def test_results_are_never_written_over_what_belongs_to_the_sweep(folder, sweep, option, name):
    place = folder()
    status, out, err = sweep(place, option, str(place.place / name))
    assert (status, out, len(err.splitlines())) == (2, "", 1)
    assert f"`{option}` must be a file of its own" in err
    assert not place.database.exists()


def test_a_picture_is_drawn_also_where_every_case_failed(folder, sweep):
    place = crossing(folder)
    for name in ("a", "b"):
        (place.place / "cards" / f"{name}.card.toml").unlink()
    status, _, err = sweep(place, "--plot", str(place.place / "p.png"))
    assert (status, err) == (1, "")
    assert (place.place / "p.png").read_bytes().startswith(b"\x89PNG")


def on_a_terminal(place) -> str:
    """What a sweep writes to a terminal of its own."""
    master, slave = pty.openpty()
    command = [sys.executable, "-m", "drivers.cli", "sweep", str(place.file), "--processes", "1"]
    environment = os.environ | {"TERM": "xterm", "COLUMNS": "100"}
    with subprocess.Popen(command, stdout=slave, stderr=slave, stdin=slave, env=environment) as process:
        os.close(slave)
        text = b""
        try:
            while block := os.read(master, 65536):
                text += block
        except OSError:  # the other end is closed
            pass
        os.close(master)
        assert process.wait(timeout=60) == 0
    return text.decode()


@pytest.fixture
def slow(tmp_path, monkeypatch) -> None:
    """Cases that take a while, in every process started from here, so that there is progress to show."""
    (tmp_path / "sitecustomize.py").write_text(
        "import time\n"
        "from drivers.sweep import run_case\n"
        "solve = run_case.solve\n"
        "run_case.solve = lambda *a, **k: (time.sleep(0.25), solve(*a, **k))[1]\n"
    )
    monkeypatch.setenv("PYTHONPATH", f"{tmp_path}{os.pathsep}{os.environ.get('PYTHONPATH', '')}")


@pytest.mark.usefixtures("slow")
def test_progress_with_time_left_is_shown_on_a_terminal(folder):
    text = on_a_terminal(folder(samples=2))
    assert "library [x]" in text
    assert re.search(r"\d+%.*0:00:0\d", text), text  # a share, and the time left
    assert "Traceback" not in text


@pytest.mark.usefixtures("slow")
def test_progress_goes_nowhere_else(folder):
    status, out, err = folder(samples=2).run("--processes", "1", "--json", "-")
    assert (status, err) == (0, "")
    assert json.loads(out)["ran"] == 24
