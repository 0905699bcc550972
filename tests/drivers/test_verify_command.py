from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from drivers.baseline_file import read_baseline
from drivers.cli import main
from tests.baselines import PATH_FILE
from tests.cards import changed, toml


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A working folder with a card, a path and a baseline of the two."""
    monkeypatch.chdir(tmp_path)
    card()
    (tmp_path / "p.path.toml").write_text(PATH_FILE)
    assert main(["record", "a.card.toml", "--path", "p.path.toml"]) == 0
    return tmp_path


def card(name: str = "a", **changes: Any) -> str:
    file = Path(f"{name}.card.toml")
    file.write_text(toml(changed({key.replace("__", "."): value for key, value in changes.items()})), encoding="utf-8")
    return str(file)


def told(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, dict[str, Any]]:
    capsys.readouterr()
    status = main([*arguments, "--json", "-"])
    return status, json.loads(capsys.readouterr().out)


def refused(capsys: pytest.CaptureFixture[str], *arguments: str) -> str:
    capsys.readouterr()
    assert main(list(arguments)) == 2
    out, err = capsys.readouterr()
    assert out == ""
    return err


def test_record_stores_the_battery_where_no_path_is_given(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, data = told(capsys, "record", "a.card.toml", "-o", "whole.baseline.json")
    assert (status, data["command"], data["verdict"]) == (0, "record", "holds")
    stored = read_baseline("whole.baseline.json")
    assert [path["name"] for path in data["paths"]] == [recorded.path.name for recorded in stored.paths]
    assert len(stored.paths) > 10
    assert {recorded.tolerance for recorded in stored.paths} == {0.01}


def test_verify_of_an_unchanged_card_holds(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, data = told(capsys, "verify", "a.card.toml", "a.baseline.json")
    assert (status, data["command"], data["verdict"], data["moved"]) == (0, "verify", "holds", [])
    path = data["paths"][0]
    assert (path["name"], path["relative"], path["tolerance"], path["holds"]) == ("pull and dwell", 0.0, 0.01, True)


def test_verify_of_a_changed_card_falls_short_and_says_what_moved(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    status, data = told(capsys, "verify", card("b", elastic__E=3150.0), "a.baseline.json")
    assert (status, data["verdict"]) == (1, "falls short")
    assert data["paths"][0]["relative"] == pytest.approx(0.05, rel=1e-6)  # stress is proportional to E
    assert data["paths"][0]["at"]["segment"] == "pull"
    moved = data["moved"][0]
    assert (moved["part"], moved["matters"]) == ("elastic", True)
    assert moved["constants"][0]["key"] == "elastic.E"
    assert (moved["constants"][0]["was"], moved["constants"][0]["now"]) == (3000.0, 3150.0)
    assert moved["sentence"].startswith("elastic: matters, 5 % of the peak on path 'pull and dwell'")


def test_the_table_says_verdict_slip_and_what_moved(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    capsys.readouterr()
    assert main(["verify", card("b", elastic__E=3.0), "a.baseline.json"]) == 1
    words = " ".join(capsys.readouterr().out.split())
    assert words.startswith("falls short: sealing resin, revision 2 does not behave as accepted: at most 99.9 %")
    assert "Likely slip: stress-unit" in words
    assert "elastic: matters" in words


def test_a_changed_constant_that_nothing_notices_is_said_to_be_without_effect(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    capsys.readouterr()
    assert main(["verify", card("b", expansion__alpha=9e-5), "a.baseline.json"]) == 0  # the path is isothermal
    words = " ".join(capsys.readouterr().out.split())
    assert "expansion: moved without effect that matters, 0 % of the peak" in words


def test_without_a_baseline_named_that_beside_the_card_is_taken(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert told(capsys, "verify", "a.card.toml")[0] == 0
    assert "b.baseline.json" in refused(capsys, "verify", card("b"))


def test_one_tolerance_serves_all_paths_or_one_each(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (here / "q.path.toml").write_text(PATH_FILE.replace("pull and dwell", "another"))
    both = ["record", "a.card.toml", "--path", "p.path.toml", "--path", "q.path.toml"]
    told(capsys, *both, "--tolerance", "2%")
    assert [recorded.tolerance for recorded in read_baseline("a.baseline.json").paths] == [0.02, 0.02]
    told(capsys, *both, "--tolerance", "2%", "--tolerance", "0.1")
    assert [recorded.tolerance for recorded in read_baseline("a.baseline.json").paths] == [0.02, 0.1]
    status, data = told(capsys, "verify", card("b", elastic__E=3150.0), "a.baseline.json")
    assert (status, [path["holds"] for path in data["paths"]]) == (1, [False, True])


def test_a_tolerance_too_many_is_refused(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    two = ["--tolerance", "1%", "--tolerance", "2%"]
    assert "once for each --path" in refused(capsys, "record", "a.card.toml", *two)
    assert "once for each --path" in refused(capsys, "record", "a.card.toml", "--path", "p.path.toml", *two)


@pytest.mark.parametrize(
    "changes",
    [
        pytest.param({"elastic__E": "stiff"}, id="no card"),
        pytest.param({"elastic__E": -3.0}, id="no material"),
        pytest.param({"shift__measured": [100.0, 130.0], "shift__outside": "refuse"}, id="no response"),
    ],
)
def test_a_record_that_fails_leaves_the_old_file(
    here: Path, capsys: pytest.CaptureFixture[str], changes: dict[str, Any]
) -> None:
    before = Path("a.baseline.json").read_bytes()
    err = refused(capsys, "record", card("b", **changes), "--path", "p.path.toml", "-o", "a.baseline.json")
    assert all("b.card.toml" in line for line in err.splitlines())
    assert Path("a.baseline.json").read_bytes() == before
    assert not list(here.glob(".*.part"))


def test_record_where_nothing_can_be_written_is_refused_before_any_work(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert "no folder" in refused(capsys, "record", "a.card.toml", "-o", "nowhere/a.baseline.json")


def test_a_damaged_baseline_is_refused_with_status_2(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    data = Path("a.baseline.json").read_bytes()
    Path("a.baseline.json").write_bytes(data.replace(b'"tolerance": 0.01', b'"tolerance": 0.91'))
    assert "its digest differs" in refused(capsys, "verify", "a.card.toml", "a.baseline.json")


def test_faults_of_card_and_baseline_are_told_together(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("b.card.toml").write_text("name =")
    Path("b.baseline.json").write_text("{}")
    err = refused(capsys, "verify", "b.card.toml", "b.baseline.json")
    assert "b.card.toml" in err
    assert "b.baseline.json" in err


def test_a_card_with_no_response_falls_short_and_says_so(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    refusing = card("b", shift__measured=[100.0, 130.0], shift__outside="refuse")
    status, data = told(capsys, "verify", refusing, "a.baseline.json")
    assert (status, data["paths"][0]["relative"], data["paths"][0]["holds"]) == (1, None, False)
    assert "outside the measured range" in data["paths"][0]["reason"]


def test_the_spread_of_a_calibration_says_whether_the_change_exceeds_it(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Path("lot.spread.toml").write_text('[spread]\n"elastic.E" = 30.0\n')
    spread = ["a.baseline.json", "--spread", "lot.spread.toml", "--samples", "40", "--seed", "2"]
    status, data = told(capsys, "verify", card("b", elastic__E=3150.0), *spread)
    assert (status, data["scatter"]["exceeds"], data["scatter"]["samples"]) == (1, True, 40)
    assert data["scatter"]["paths"][0]["change"] == data["paths"][0]["relative"]
    # The spread informs; the verdict stays that of the tolerance.
    status, data = told(capsys, "verify", card("b", elastic__E=3036.0), *spread)
    assert (status, data["scatter"]["exceeds"]) == (1, False)
    capsys.readouterr()
    main(["verify", "b.card.toml", *spread])
    assert "within the scatter of the calibration on every path" in " ".join(capsys.readouterr().out.split())


def test_a_spread_file_with_faults_is_refused(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("lot.spread.toml").write_text('[spread]\n"elastic.X" = 30.0\n')
    assert "lot.spread.toml" in refused(capsys, "verify", "a.card.toml", "--spread", "lot.spread.toml")


@pytest.mark.parametrize(
    "changes", [{}, {"elastic__E": 3150.0}, {"shift__measured": [100.0, 130.0], "shift__outside": "refuse"}]
)
def test_verify_draws_before_and_after(here: Path, capsys: pytest.CaptureFixture[str], changes: dict[str, Any]) -> None:
    Path("lot.spread.toml").write_text('[spread]\n"elastic.E" = 30.0\n')
    spread = ["--spread", "lot.spread.toml", "--samples", "20"]
    main(["verify", card("b", **changes), "a.baseline.json", "--plot", "v.png", *spread])
    assert Path("v.png").read_bytes().startswith(b"\x89PNG")
    assert "--plot" in refused(capsys, "verify", "b.card.toml", "a.baseline.json", "--plot", "v.doc")
