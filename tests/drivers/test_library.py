from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from drivers.baseline_file import Baseline
from drivers.cli import main
from drivers.library import baseline_beside, find_cards, paired
from matlib.errors import FileError
from tests.baselines import PATH_FILE, recorded, written
from tests.cards import changed, toml


@pytest.fixture(scope="module")
def baseline() -> Baseline:
    return recorded(names=("relaxation, 60 degC",))


def card(folder: Path, name: str, **changes: Any) -> Path:
    file = folder / f"{name}.card.toml"
    file.parent.mkdir(parents=True, exist_ok=True)
    file.write_text(toml(changed({key.replace("__", "."): value for key, value in changes.items()})), encoding="utf-8")
    return file


def told(capsys: pytest.CaptureFixture[str], *arguments: object) -> tuple[int, dict[str, Any], list[str]]:
    """Exit status, JSON, and the lines on standard error."""
    status = main([*map(str, arguments), "--json", "-"])
    out, err = capsys.readouterr()
    return status, json.loads(out), err.splitlines()


def test_all_cards_at_and_below_a_folder_are_found_by_name(tmp_path: Path) -> None:
    files = [card(tmp_path, name) for name in ("b", "a", "sub/deep/c")]
    (tmp_path / "notes.toml").write_text("")
    (tmp_path / "folder.card.toml").mkdir()
    assert find_cards(tmp_path) == tuple(sorted(map(str, files)))


def test_a_folder_without_a_card_is_a_fault(tmp_path: Path) -> None:
    with pytest.raises(FileError, match=r"files named \*\.card\.toml"):
        find_cards(tmp_path)
    with pytest.raises(FileError, match="expected a folder of cards"):
        find_cards(tmp_path / "nowhere")


def test_a_baseline_belongs_to_the_card_beside_it(tmp_path: Path) -> None:
    assert baseline_beside(tmp_path / "x.card.toml") == str(tmp_path / "x.baseline.json")
    assert baseline_beside("odd.toml") == "odd.toml.baseline.json"


def test_cards_are_paired_by_place_then_by_file_name_and_the_lonely_are_kept(tmp_path: Path) -> None:
    a, b = tmp_path / "a", tmp_path / "b"
    for name in ("same", "old/moved", "only-a", "x/twice", "y/twice"):
        card(a, name)
    for name in ("same", "new/moved", "only-b", "z/twice"):
        card(b, name)
    pairs = {pair.name: (pair.first is not None, pair.second is not None) for pair in paired(a, b)}
    assert pairs == {
        "same.card.toml": (True, True),
        "moved.card.toml": (True, True),
        "only-a.card.toml": (True, False),
        "only-b.card.toml": (False, True),
        "x/twice.card.toml": (True, False),  # a name twice in one folder pairs with nothing
        "y/twice.card.toml": (True, False),
        "z/twice.card.toml": (False, True),
    }


def test_check_of_a_folder_gives_one_table_the_worst_first(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    card(tmp_path, "sane")
    card(tmp_path, "sub/wrong", shift__C1=-1.0)
    card(tmp_path, "warned", service__temperature=[-60.0, 110.0])
    status, data, err = told(capsys, "check", tmp_path)
    assert (status, data["verdict"], err) == (1, "falls short", [])
    assert [(Path(entry["file"]).name, entry["outcome"]) for entry in data["cards"]] == [
        ("wrong.card.toml", "falls short"),
        ("warned.card.toml", "holds"),
        ("sane.card.toml", "holds"),
    ]
    assert {finding["severity"] for finding in data["cards"][0]["findings"]} >= {"error"}
    assert main(["check", str(tmp_path)]) == 1
    assert "falls short: 2 of 3 cards are sane; 1 falls short" in capsys.readouterr().out


def test_unreadable_cards_give_all_their_faults_and_the_others_are_still_shown(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    card(tmp_path, "sane")
    (tmp_path / "torn.card.toml").write_text("name =")
    card(tmp_path, "wrong", elastic__E="stiff", units__time="year")
    status, data, err = told(capsys, "check", tmp_path)
    assert status == 2
    assert [entry["outcome"] for entry in data["cards"]] == ["unreadable", "unreadable", "holds"]
    assert sum("torn.card.toml" in line for line in err) == 1
    assert sum("wrong.card.toml: elastic.E" in line for line in err) == 1
    assert sum("wrong.card.toml: units.time" in line for line in err) == 1


def test_verify_of_a_folder_pairs_each_card_with_the_baseline_beside_it(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], baseline: Baseline
) -> None:
    (tmp_path / "sub").mkdir()
    written(tmp_path, "same", baseline)
    written(tmp_path, "softer", baseline, {"elastic.E": 2900.0})
    written(tmp_path / "sub", "softest", baseline, {"elastic.E": 2500.0})
    status, data, err = told(capsys, "verify", tmp_path)
    assert (status, data["verdict"], err) == (1, "falls short", [])
    names = [Path(entry["card"]["file"]).name for entry in data["cards"]]
    assert names == ["softest.card.toml", "softer.card.toml", "same.card.toml"]
    worst = data["cards"][0]
    assert worst["paths"][0]["relative"] == pytest.approx(500.0 / 3000.0, rel=1e-6)  # proportional to E
    assert worst["moved"][0]["part"] == "elastic"
    assert "moved: elastic" in worst["note"]


def test_a_card_without_a_baseline_is_told_and_falls_short(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], baseline: Baseline
) -> None:
    written(tmp_path, "same", baseline)
    card(tmp_path, "new")
    status, data, err = told(capsys, "verify", tmp_path)
    assert (status, err) == (1, [])
    assert data["cards"][0]["outcome"] == "missing"
    assert "no baseline beside it: record one, new.baseline.json" in data["cards"][0]["note"]


def test_a_damaged_baseline_in_a_library_is_a_fault_and_the_others_are_still_shown(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], baseline: Baseline
) -> None:
    written(tmp_path, "same", baseline)
    written(tmp_path, "torn", baseline)
    with (tmp_path / "torn.baseline.json").open("a") as stream:
        stream.write(" ")
    status, data, err = told(capsys, "verify", tmp_path)
    assert status == 2
    assert [entry["outcome"] for entry in data["cards"]] == ["unreadable", "holds"]
    assert len(err) == 1
    assert "torn.baseline.json" in err[0]


def test_compare_of_two_folders_pairs_their_cards_the_worst_first(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    a, b, path = tmp_path / "a", tmp_path / "b", tmp_path / "p.path.toml"
    path.write_text(PATH_FILE)
    for folder, E in ((a, 3000.0), (b, 3.0)):  # GPa read as MPa
        card(folder, "same")
        card(folder, "slip", elastic__E=E)
        card(folder, "x/softer", elastic__E=3000.0 if folder is a else 2900.0)
    card(a, "lonely")
    status, data, err = told(capsys, "compare", a, b, "--path", path)
    assert (status, err) == (1, [])
    rows = [(entry["name"], entry["outcome"]) for entry in data["pairs"]]
    assert rows == [
        ("lonely.card.toml", "missing"),
        ("slip.card.toml", "falls short"),
        ("x/softer.card.toml", "falls short"),
        ("same.card.toml", "holds"),
    ]
    assert "no partner" in data["pairs"][0]["note"]
    assert data["pairs"][1]["slips"][0]["id"] == "stress-unit"
    assert data["pairs"][3]["same"] == "identical"


def test_an_unreadable_card_without_a_partner_is_a_fault_too(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    a, b, path = tmp_path / "a", tmp_path / "b", tmp_path / "p.path.toml"
    path.write_text(PATH_FILE)
    for folder in (a, b):
        card(folder, "same")
    (a / "torn.card.toml").write_text("name =")
    status, data, err = told(capsys, "compare", a, b, "--path", path)
    assert status == 2
    assert [entry["outcome"] for entry in data["pairs"]] == ["unreadable", "holds"]
    assert "torn.card.toml" in err[0]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["verify", "{}", "x.baseline.json"], "left out for a folder"),
        (["verify", "{}", "--spread", "s.toml"], "left out for a folder"),
        (["verify", "{}", "--plot", "v.png"], "left out for a folder"),
        (["compare", "{}", "{}/a.card.toml"], "two cards or two folders"),
        (["compare", "{}", "{}", "--plot", "v.png"], "left out for folders"),
    ],
)
def test_what_makes_no_sense_for_a_folder_is_refused(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], message: str
) -> None:
    card(tmp_path, "a")
    assert main([argument.replace("{}", str(tmp_path)) for argument in arguments]) == 2
    assert message in capsys.readouterr().err
