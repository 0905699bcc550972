"""`cardproof steps`: what it writes, how it ends, what it refuses."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from drivers.cli import main
from drivers.path_file import read_path
from drivers.point import drive
from drivers.reference import solve
from drivers.studies.runner import Rule
from matlib.card import read_card
from matlib.recursion import RECURSIONS
from matlib.shift import SHIFT_RULES
from tests.drivers.files import CARD, PATH

RECORD = "time,temperature,strain\n"


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A working folder with a card and a path, and a terminal of 80 columns."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "80")
    (tmp_path / "a.card.toml").write_text(CARD)
    (tmp_path / "p.path.toml").write_text(PATH)
    return tmp_path


def told(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, dict[str, Any]]:
    capsys.readouterr()
    status = main(["steps", "a.card.toml", "p.path.toml", *arguments, "--json", "-"])
    return status, json.loads(capsys.readouterr().out)


def shown(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str]:
    capsys.readouterr()
    status = main(["steps", "a.card.toml", "p.path.toml", *arguments])
    return status, capsys.readouterr().out


def refused(capsys: pytest.CaptureFixture[str], *arguments: str) -> str:
    """The one line that a refusal says."""
    capsys.readouterr()
    assert main(list(arguments)) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    return err


def test_every_rule_is_studied_and_the_json_has_the_keys_that_scripts_rely_on(here, capsys):
    status, data = told(capsys, "--tolerance", "1%")
    assert (data["command"], data["verdict"], status) == ("steps", "holds" if status == 0 else "falls short", status)
    assert data["tolerance"] == 0.01
    assert 0.0 < data["reference"]["relative_bound"] <= 1e-5
    assert data["reference"]["estimated"] is False
    assert [(rule["shift_rule"], rule["recursion"]) for rule in data["rules"]] == [
        (one, other) for one in SHIFT_RULES for other in RECURSIONS
    ]
    for rule in data["rules"]:
        assert rule["order"] is None or 0.5 < rule["order"] < 2.5
        assert rule["increments_needed"] == 6 * rule["increments_each"]  # two segments, and two in a cycle of two
        for one, next_one in zip(rule["errors"], rule["errors"][1:], strict=False):
            assert next_one["increments"] == 2 * one["increments"]
            assert 0.0 < next_one["relative_error"] < 1.0
    assert [one["segment"] for one in data["recommended"]] == ["pull", "dwell", "quench", "heat"]
    for one in data["recommended"]:
        assert one["increments"] >= 1
        assert one["largest_increment"] > 0.0
    assert {"segment", "share", "cause", "sentence", "temperature", "decades", "ratio"} <= set(data["blame"])


def test_the_own_error_is_that_of_the_run_against_the_reference_solution(here, capsys):
    _, data = told(capsys, "--tolerance", "1%", "--shift-rule", "end", "--recursion", "midpoint")
    material, path = read_card("a.card.toml").material(), read_path("p.path.toml")
    run = drive(Rule(shift_rule="end", recursion="midpoint").routine(material), path)
    truth = solve(material, path, accuracy=1e-8).history
    gaps = abs(run.stress_components - truth.stress_components).max(axis=1)
    row = int(gaps.argmax())
    own = data["own"]
    assert (own["increments"], own["quantity"], own["component"]) == (27, "stress", "s11")
    # Two reference solutions, one within 1e-5 of the peak, and a tenth of that in fact.
    assert own["relative_error"] == pytest.approx(float(gaps[row]) / truth.peak_stress, abs=1e-5)
    assert (own["at"]["segment"], own["at"]["time"]) == (truth.segment[row], pytest.approx(float(truth.time[row])))


def test_one_rule_alone_is_recommended_for_when_it_is_asked_for(here, capsys):
    _, data = told(capsys, "--tolerance", "0.2%", "--shift-rule", "mean-log", "--recursion", "backward-euler")
    assert [(rule["shift_rule"], rule["recursion"]) for rule in data["rules"]] == [("mean-log", "backward-euler")]
    assert (data["own"]["shift_rule"], data["own"]["recursion"]) == ("mean-log", "backward-euler")
    assert 0.2 * 2e-3 <= data["recommended_error"] <= 2e-3
    counts = [one["increments"] for one in data["recommended"]]
    assert data["recommended_total"] == counts[0] + counts[1] + 2 * (counts[2] + counts[3])


def test_a_shift_rule_alone_is_studied_with_every_recursion(here, capsys):
    _, data = told(capsys, "--tolerance", "1%", "--shift-rule", "middle")
    assert [rule["recursion"] for rule in data["rules"]] == list(RECURSIONS)
    assert {rule["shift_rule"] for rule in data["rules"]} == {"middle"}


def test_recommended_increments_written_into_the_path_hold(here, capsys):
    rule = ("--shift-rule", "integrated", "--recursion", "exponential")
    status, data = told(capsys, "--tolerance", "0.1%", *rule)
    assert status == 1
    text = PATH
    for one, old in zip(data["recommended"], (5, 8, 4, 3), strict=True):
        text = text.replace(f"increments = {old}", f"increments = N{one['increments']}", 1)
    (here / "p.path.toml").write_text(text.replace("= N", "= "))
    status, again = told(capsys, "--tolerance", "0.1%", *rule)
    assert (status, again["verdict"]) == (0, "holds")
    assert again["own"]["relative_error"] == pytest.approx(data["recommended_error"], rel=1e-2)


def test_a_percentage_and_a_fraction_are_the_same_tolerance(here, capsys):
    rule = ("--shift-rule", "integrated", "--recursion", "exponential")
    assert told(capsys, "--tolerance", "2%", *rule) == told(capsys, "--tolerance", "0.02", *rule)


def test_tables_fit_a_terminal_of_eighty_columns_and_say_the_verdict_first(here, capsys):
    status, text = shown(capsys, "--tolerance", "1%")
    assert text.startswith(
        "falls short: the path's own 27 increments" if status else "holds: the path's own 27 increments"
    )
    lines = text.splitlines()
    assert max(len(line.rstrip()) for line in lines) <= 80
    # Every rule on one line of its own, every segment as well: nothing is folded.
    for name in (*SHIFT_RULES,):
        assert sum(line.startswith(f"{name} ") for line in lines) == len(RECURSIONS)
    for label in ("pull", "dwell", "quench", "heat"):
        assert sum(line.startswith(f"{label} ") for line in lines) == 1
    for words in (
        "Judged on the reference solution, guaranteed to",
        "makes",
        "Recommended for integrated, exponential:",
    ):
        assert words in text


def test_a_picture_is_drawn(here, capsys):
    shown(capsys, "--tolerance", "1%", "--shift-rule", "middle", "--plot", "steps.png")
    assert (here / "steps.png").read_bytes().startswith(b"\x89PNG")


@pytest.mark.parametrize("recursion", ["exponential", "midpoint"])
def test_a_path_without_error_is_drawn_and_written_as_well(here, capsys, recursion):
    still = PATH[: PATH.index("[[segment]]")] + '[[segment]]\nlabel = "rest"\nduration = 1.0\n'
    (here / "p.path.toml").write_text(still.replace("80.0", "70.0"))
    status, data = told(capsys, "--tolerance", "1%", "--recursion", recursion, "--plot", "steps.svg")
    assert (status, data["own"]["relative_error"], data["blame"]) == (0, 0.0, None)
    assert {rule["order"] for rule in data["rules"]} == {None}
    assert (here / "steps.svg").stat().st_size > 1000


def test_a_measured_record_is_studied(here, capsys):
    rows = [(60.0 * k, 80.0 + 15.0 * ((k * 7) % 5) / 4.0, 0.002 * ((k * 3) % 4)) for k in range(12)]
    (here / "oven.csv").write_text(RECORD + "".join(f"{t},{T},{e}\n" for t, T, e in rows))
    (here / "p.path.toml").write_text(
        'name = "oven"\nmode = "uniaxial strain"\nrecord = "oven.csv"\n[units]\ntime = "s"\ntemperature = "degC"\n'
    )
    _, data = told(capsys, "--tolerance", "1%", "--recursion", "midpoint")
    assert data["rules"][0]["errors"][0]["increments"] == 1 + 11  # the first row is a jump to where the record starts
    assert len(data["recommended"]) == 1
    for rule in data["rules"]:
        assert rule["increments_needed"] == 1 + 11 * rule["increments_each"]
    _, text = shown(capsys, "--tolerance", "1%", "--recursion", "midpoint")
    assert "a piece" in text


@pytest.mark.parametrize("tolerance", ["0", "-1%", "0%", "much", "", "nan", "inf", "1e-12", "200%"])
def test_a_tolerance_that_is_none_is_refused_in_one_line(here, capsys, tolerance):
    line = refused(capsys, "steps", "a.card.toml", "p.path.toml", f"--tolerance={tolerance}")
    assert "tolerance` must be " in line
    assert "(got " in line


def test_a_missing_tolerance_is_refused_in_one_line(here, capsys):
    assert "--tolerance" in refused(capsys, "steps", "a.card.toml", "p.path.toml")


@pytest.mark.parametrize(("option", "known"), [("--shift-rule", SHIFT_RULES), ("--recursion", RECURSIONS)])
def test_an_unknown_rule_is_refused_with_the_known_ones(here, capsys, option, known):
    line = refused(capsys, "steps", "a.card.toml", "p.path.toml", "--tolerance", "1%", option, "best")
    assert "'best'" in line
    assert all(name in line for name in known)


def test_a_path_into_the_pole_is_refused_with_the_temperature(here, capsys):
    (here / "p.path.toml").write_text(PATH.replace("temperature = 70.0", "temperature = 10.0"))  # pole: 80 - 61 degC
    line = refused(capsys, "steps", "a.card.toml", "p.path.toml", "--tolerance", "1%")
    assert "pole" in line
    assert "19 degC" in line


def test_a_law_that_refuses_beyond_its_range_is_heard(here, capsys):
    narrow = CARD.replace("[60.0, 130.0]", "[75.0, 130.0]").replace('"extrapolate"', '"refuse"')
    (here / "a.card.toml").write_text(narrow)
    assert "outside the measured range" in refused(capsys, "steps", "a.card.toml", "p.path.toml", "--tolerance", "1%")


@pytest.mark.parametrize("file", ["picture.gif", "nowhere/steps.png"])
def test_a_picture_that_cannot_be_written_is_refused_before_any_work(here, capsys, file):
    refused(capsys, "steps", "a.card.toml", "p.path.toml", "--tolerance", "1%", "--plot", file)


def test_files_that_are_not_there_are_all_named(here, capsys):
    capsys.readouterr()
    assert main(["steps", "b.card.toml", "q.path.toml", "--tolerance", "1%"]) == 2
    err = capsys.readouterr().err
    assert "b.card.toml" in err
    assert "q.path.toml" in err
