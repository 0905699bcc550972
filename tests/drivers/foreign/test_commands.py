"""drive, compare and steps on a routine."""

import csv
import json
from pathlib import Path

import pytest

from drivers.cli import main
from drivers.foreign.replay import replay
from tests.drivers.files import PATH
from tests.drivers.foreign.faults import workers

COOLING = """name = "clamped cooling"
mode = "uniaxial strain"

[units]
time = "min"
temperature = "degC"

[start]
temperature = 110.0

[[segment]]
label = "cool"
duration = 90.0
temperature = 23.0
increments = 40
"""

THERMAL = PATH.replace("duration = 60.0\n", "duration = 60.0\ntemperature = 100.0\n", 1)


@pytest.fixture
def here(examples, tmp_path, monkeypatch):
    """A working folder with a path, beside the examples."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "p.path.toml").write_text(THERMAL)
    (tmp_path / "cooling.path.toml").write_text(COOLING)
    return examples


@pytest.fixture
def run(here, capsys):
    def of(*arguments):
        status = main([str(argument) for argument in arguments])
        out, err = capsys.readouterr()
        assert not workers()
        return status, out, err

    return of


def loaded(file):
    return json.loads(Path(file).read_text())


def uncarded(here, tmp_path):
    """The example in C as a routine of which nothing is known."""
    text = (here / "c.routine.toml").read_text()
    file = tmp_path / "bare.routine.toml"
    text = text.replace('card = "laboratory.card.toml"\n', "").replace('"routine-c.so"', f'"{here}/routine-c.so"')
    file.write_text(text)
    return file


def test_drive_writes_the_history_of_a_routine_in_the_units_of_its_card(run, here):
    status, out, err = run(
        "drive", here / "c.routine.toml", "p.path.toml", "-o", "h.csv", "--plot", "h.png", "--json", "j"
    )
    assert (status, err) == (0, "")
    assert "its own rule" in out
    data = loaded("j")
    assert (data["routine"], data["card"], data["shift_rule"]) == ("example in C", "potting compound PC-7", "its own")
    assert data["end"]["reduced_time"] is None
    rows = list(csv.reader(Path("h.csv").read_text().splitlines()))
    assert rows[0][10] == "s11 [MPa]"
    assert {row[3] for row in rows[1:]} == {""}  # a routine does not tell its clock
    ours = ("drive", here / "laboratory.card.toml", "p.path.toml", "--shift-rule", "mean-log", "--json", "k")
    assert run(*ours)[0] == 0
    # the same formulas in another order
    assert data["end"]["stress"]["s11"] == pytest.approx(loaded("k")["end"]["stress"]["s11"], rel=1e-12)


def test_drive_shows_a_routine_of_which_nothing_is_known_in_si_units(run, here, tmp_path):
    status, out, _ = run("drive", uncarded(here, tmp_path), "p.path.toml")
    assert status == 0
    assert "s11 [Pa]" in out
    assert "T [K]" in out


@pytest.mark.parametrize("option", [("--exact",), ("--shift-rule", "middle"), ("--recursion", "midpoint")])
def test_drive_refuses_a_routine_a_rule_that_is_not_its_own(run, here, option):
    status, _, err = run("drive", here / "c.routine.toml", "p.path.toml", *option)
    assert status == 2
    assert option[0] in err


def test_compare_holds_a_routine_against_the_reference_solution_of_a_card(run, here):
    status, out, _ = run("compare", here / "laboratory.card.toml", here / "c.routine.toml", "--path", "p.path.toml",
                         "--tolerance", "5%", "--json", "j", "--plot", "c.png")  # fmt: skip
    data = loaded("j")
    assert status == 0
    assert data["same"] == "within tolerance"
    assert [one["kind"] for one in data["cards"]] == ["card", "routine"]
    assert 0.0 < data["paths"][0]["relative"] < 0.05
    assert 0.0 < data["paths"][0]["bound"] < 1e-6
    assert not data["paths"][0]["estimated"]
    assert "the card's reference solution and the routine's run" in " ".join(out.split())


def test_compare_says_that_a_wrong_card_and_a_routine_differ(run, here):
    arguments = ("compare", here / "slip.card.toml", here / "c.routine.toml", "--path", "p.path.toml", "--json", "j")
    status, out, _ = run(*arguments)
    assert status == 1
    assert "Part of them may come from the increments" in " ".join(out.split())


def test_compare_finds_two_builds_of_a_routine_identical_to_rounding(run, here):
    status, _, _ = run("compare", here / "c.routine.toml", here / "python.routine.toml", "--json", "j")
    assert status == 0
    assert loaded("j")["same"] == "identical"  # on the battery of the card that they name
    assert len(loaded("j")["paths"]) > 10


def test_compare_needs_a_path_where_no_card_is_known(run, here, tmp_path):
    bare = uncarded(here, tmp_path)
    assert run("compare", bare, bare)[0] == 2
    assert run("compare", bare, bare, "--path", "p.path.toml")[0] == 0


def test_steps_judges_a_routine_on_the_reference_solution_of_its_card(run, here):
    status, _, _ = run("steps", here / "c.routine.toml", "cooling.path.toml", "--tolerance", "0.01%", "--json", "j",
                         "--plot", "s.png")  # fmt: skip
    data = loaded("j")
    (rule,) = data["rules"]
    assert (rule["shift_rule"], rule["recursion"]) == ("its own", "its own")
    assert rule["order"] == pytest.approx(2.0, abs=0.15)  # mean-log and exponential are second order
    assert not data["reference"]["estimated"]
    assert data["recommended_error"] <= 1e-4
    assert status == (0 if data["own"]["relative_error"] < 1e-4 else 1)
    assert data["blame"]["cause"] == "its own"


def test_steps_judges_a_routine_of_which_nothing_is_known_on_its_own_finest_run(run, here, tmp_path):
    run("steps", here / "c.routine.toml", "p.path.toml", "--tolerance", "5%", "--json", "j")
    _, out, _ = run("steps", uncarded(here, tmp_path), "p.path.toml", "--tolerance", "5%", "--json", "k")
    card, bare = loaded("j"), loaded("k")
    assert "the routine's own finest run, estimated" in out
    assert bare["reference"]["estimated"]
    # what it finds is what the reference solution says, to the bound that it states of itself
    bound = bare["reference"]["relative_bound"]
    assert bare["own"]["relative_error"] == pytest.approx(card["own"]["relative_error"], abs=bound + 1e-6)


def test_steps_refuses_a_routine_a_rule_that_is_not_its_own(run, here):
    status, _, err = run(
        "steps", here / "c.routine.toml", "p.path.toml", "--tolerance", "1%", "--recursion", "midpoint"
    )
    assert status == 2
    assert "--recursion" in err


@pytest.mark.parametrize(
    "arguments",
    [("drive", "F", "p.path.toml"), ("compare", "F", "F", "--path", "p.path.toml"),
     ("steps", "F", "p.path.toml", "--tolerance", "1%")],
)  # fmt: skip
def test_a_failure_is_one_line_and_a_replay_file(run, here, tmp_path, arguments):
    text = (here / "c.routine.toml").read_text().replace("333.15", "372.0").replace("131.0", "10.0")  # pole at 362 K
    (here / "failing.routine.toml").write_text(text)
    given = [here / "failing.routine.toml" if argument == "F" else argument for argument in arguments]
    status, out, err = run(*given, "--json", "j")
    assert (status, out) == (1, "")
    (line,) = err.splitlines()
    assert "code in the increment of" in line
    assert "it returned 1; saved for replay in failing.replay.json" in line
    data = loaded("j")
    assert data["verdict"] == "falls short"
    assert (data["failure"]["kind"], data["failure"]["replay"]) == ("code", "failing.replay.json")
    assert replay(tmp_path / "failing.replay.json").reproduced
