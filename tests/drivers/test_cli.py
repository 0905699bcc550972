"""The command line: exit status, JSON keys, CSV columns, one line a fault."""

import csv
import json
import subprocess
import sys
from pathlib import Path

import pytest

from drivers.cli import main
from matlib.card import read_card
from matlib.version import __version__
from tests.drivers.files import BAD, CARD, PATH, ROWS, SOFTER

COLUMNS = [
    *("segment", "time", "temperature", "reduced_time"),
    *("e11", "e22", "e33", "g23", "g13", "g12"),
    *("s11", "s22", "s33", "s23", "s13", "s12"),
]


@pytest.fixture
def here(tmp_path, monkeypatch) -> Path:
    """A folder with files of every kind, which is the working folder too."""
    for name, text in (
        ("a.card.toml", CARD),
        ("soft.card.toml", SOFTER),
        ("bad.card.toml", BAD),
        ("p.path.toml", PATH),
    ):
        (tmp_path / name).write_text(text)
    monkeypatch.chdir(tmp_path)
    return tmp_path


class Run:
    """One run: its exit status and what it wrote."""

    def __init__(self, status: int, out: str, err: str) -> None:
        self.status, self.out, self.err = status, out, err
        self.lines = err.splitlines()
        self.words = " ".join(out.split())


@pytest.fixture
def run(here, capsys):
    def of(*arguments: str) -> Run:
        status = main(list(arguments))
        return Run(status, *capsys.readouterr())

    return of


@pytest.fixture
def data(run):
    """The JSON of a run, which is all that it writes to standard output, and its exit status."""

    def of(*arguments: str) -> tuple[dict, int]:
        result = run(*arguments, "--json", "-")
        assert result.err == ""
        return json.loads(result.out), result.status

    return of


def assert_refused(result: Run, *parts: str) -> None:
    """Exit 2, one line on standard error with all of `parts`, nothing on standard output."""
    assert (result.status, result.out, len(result.lines)) == (2, "", 1), result.err
    assert result.lines[0].startswith("cardproof: ") or ".toml: " in result.lines[0]
    for part in parts:
        assert part in result.lines[0]


def assert_envelope(found: dict, command: str, verdict: str) -> None:
    assert (found["command"], found["version"], found["verdict"]) == (command, __version__, verdict)


# check


def test_check_of_a_sound_card_holds(data):
    found, status = data("check", "a.card.toml")
    assert status == 0
    assert_envelope(found, "check", "holds")
    (card,) = found["cards"]
    assert (card["name"], card["file"]) == ("resin [a]", "a.card.toml")
    assert all(set(finding) == {"id", "severity", "message"} for finding in card["findings"])
    assert {finding["severity"] for finding in card["findings"]} <= {"warning", "note"}


def test_check_of_several_cards_falls_short_where_one_does(data):
    found, status = data("check", "a.card.toml", "bad.card.toml")
    assert status == 1
    assert_envelope(found, "check", "falls short")
    assert [card["file"] for card in found["cards"]] == ["a.card.toml", "bad.card.toml"]
    assert [f["id"] for f in found["cards"][1]["findings"] if f["severity"] == "error"] == ["fractions-reach-one"]


def test_check_says_its_verdict_in_words_with_brackets_in_a_name_untouched(run):
    good, bad = run("check", "a.card.toml"), run("check", "bad.card.toml")
    assert good.out.startswith("holds: resin [a], revision 2 (a.card.toml): ")
    assert bad.out.startswith("falls short: ")
    assert "1 error" in bad.out
    assert "fractions-reach-one" in bad.out


def test_check_tells_the_faults_of_all_files_at_once(run, here):
    (here / "x.card.toml").write_text(CARD.replace('law = "wlf"', 'law = "wlff"').replace("nu = 0.36", 'nu = "0.36"'))
    result = run("check", "x.card.toml", "missing.card.toml", "a.card.toml")
    assert (result.status, result.out) == (2, "")
    assert [line.partition(": ")[0] for line in result.lines] == ["x.card.toml", "x.card.toml", "missing.card.toml"]
    assert "elastic.nu: found '0.36', expected a number" in result.lines[0]
    assert "shift.law: found 'wlff', expected one of none, wlf, arrhenius" in result.lines[1]
    assert "found nothing, expected a file of this name" in result.lines[2]


# convert


def test_convert_writes_an_exact_card_that_compares_as_identical(data):
    found, status = data(
        "convert", "a.card.toml", "--to", "vft", "--reference", "60degC", "--units", "K", "-o", "new.card.toml"
    )
    assert status == 0
    assert_envelope(found, "convert", "holds")
    assert found["exact"] is True
    assert found["law"] == "vft"
    assert found["largest_error_decades"] < 1e-12
    assert set(found["constants"]) >= {"T_ref", "T_inf", "B"}
    assert found["constants"]["T_inf"] == pytest.approx(353.15 - 61.0, rel=1e-12)
    compared, status = data("compare", "a.card.toml", "new.card.toml")
    assert (compared["same"], status) == ("identical", 0)


def test_a_conversion_onto_its_own_card_says_so(run, here):
    told = "a.card.toml has taken the place of the card that it was made from"
    assert told not in run("convert", "a.card.toml", "--to", "vft", "-o", "new.card.toml").words
    assert told in run("convert", "a.card.toml", "--to", "vft", "-o", "a.card.toml").words
    assert read_card("a.card.toml").law_table.model_dump()["law"] == "vft"


def test_convert_marks_an_inexact_card(data):
    found, status = data(
        "convert", "a.card.toml", "--to", "arrhenius", "--range", "70degC", "373.15K", "-o", "new.card.toml"
    )
    assert status == 0
    assert found["exact"] is False
    assert found["largest_error_decades"] > 0.1
    assert found["fitted_range"] == pytest.approx([343.15, 373.15])
    assert read_card("new.card.toml").document.made_from is not None


def test_convert_samples_the_law_as_a_table(data):
    found, _ = data("convert", "a.card.toml", "--to", "table", "--points", "7", "-o", "new.card.toml")
    assert found["law"] == "table"
    points = found["constants"]["points"]
    assert len(points) == 8  # seven, and T_ref
    assert [80.0, 0.0] in points
    assert (points[0][0], points[-1][0]) == (60.0, 130.0)
    assert data("check", "new.card.toml")[1] == 0


def test_convert_says_in_words_what_it_made(run):
    exact = run("convert", "a.card.toml", "--to", "vft", "-o", "new.card.toml")
    assert exact.out.startswith("exact: new.card.toml says what a.card.toml says, to rounding")
    inexact = run("convert", "a.card.toml", "--to", "arrhenius", "-o", "new.card.toml")
    assert inexact.out.startswith("inexact: new.card.toml is at most ")
    assert "decades of a_T off at " in inexact.out


@pytest.mark.parametrize(
    ("arguments", "parts"),
    [
        (("--to", "wlff"), ("unknown law for --to 'wlff'", "wlf, vft, arrhenius, table")),
        (("--to", "vft", "--reference", "80bar"), ("`temperature` must be a temperature such as 40degC",)),
        (("--to", "vft", "--reference", "-300"), ("above absolute zero",)),
        (("--to", "vft", "--reference", "1degC"), ("pole",)),
        (("--to", "table", "--points", "1"), ("`--points` must be a whole number from 2 to 10000",)),
        (("--to", "wlf", "--base", "2"), ("`--base` must be 10 or e",)),
        (("--to", "vft", "--units", "bar"), ("unknown unit for --units 'bar'",)),
        (("--to", "vft", "--units", "K", "--units", "degF"), ("two temperature units",)),
    ],
)
def test_convert_refuses_what_it_cannot_make_and_writes_nothing(run, here, arguments, parts):
    assert_refused(run("convert", "a.card.toml", *arguments, "-o", "new.card.toml"), *parts)
    assert not (here / "new.card.toml").exists()


# drive


def test_drive_writes_every_row_with_the_columns_of_the_format(data, here):
    found, status = data("drive", "a.card.toml", "p.path.toml", "-o", "h.csv")
    assert status == 0
    assert_envelope(found, "drive", "holds")
    assert (found["rows"], found["file"]) == (ROWS, "h.csv")
    header, *rows = list(csv.reader((here / "h.csv").read_text().splitlines()))
    assert [cell.partition(" ")[0] for cell in header] == COLUMNS
    assert [cell.partition(" ")[2] for cell in header] == ["", "[s]", "[degC]", "[s]"] + ["[-]"] * 6 + ["[MPa]"] * 6
    assert len(rows) == ROWS
    assert [row[0] for row in rows[:1] + rows[-1:]] == ["start", "heat (2)"]
    assert [float(cell) for cell in rows[0][1:]] == [0.0, 80.0] + [0.0] * 13
    assert float(rows[-1][1]) == pytest.approx(30.0 + 3600.0 + 480.0)
    assert float(rows[-1][2]) == pytest.approx(100.0)
    assert found["end"]["stress"]["s11"] == pytest.approx(float(rows[-1][10]) * 1e6)


def test_drive_keeps_the_rows_that_are_asked_for(data):
    assert data("drive", "a.card.toml", "p.path.toml", "--keep", "ends")[0]["rows"] == 1 + 2 + 4
    # every 10th of 27 increments, and the ends, which are the 5th, 13th, 17th, 20th, 24th and 27th
    assert data("drive", "a.card.toml", "p.path.toml", "--keep", "10")[0]["rows"] == 1 + 6 + 1


def test_drive_takes_other_rules(data):
    usual, _ = data("drive", "a.card.toml", "p.path.toml")
    other, _ = data("drive", "a.card.toml", "p.path.toml", "--shift-rule", "start", "--recursion", "backward-euler")
    assert (usual["shift_rule"], usual["recursion"]) == ("integrated", "exponential")
    assert (other["shift_rule"], other["recursion"]) == ("start", "backward-euler")
    assert usual["peak_stress"] != other["peak_stress"]


def test_drive_exact_is_the_reference_solution_with_a_bound_in_the_last_column(data, here):
    found, status = data("drive", "a.card.toml", "p.path.toml", "--exact", "-o", "h.csv")
    assert (status, found["exact"], found["rows"]) == (0, True, ROWS)
    header, *rows = list(csv.reader((here / "h.csv").read_text().splitlines()))
    assert [cell.partition(" ")[0] for cell in header] == [*COLUMNS, "bound"]
    assert header[-1] == "bound [MPa]"
    fine, _ = data("drive", "a.card.toml", "p.path.toml")
    s11, bound = float(rows[-1][10]) * 1e6, float(rows[-1][-1]) * 1e6
    assert 0.0 < bound < 1e-6 * fine["peak_stress"]
    assert abs(fine["end"]["stress"]["s11"] - s11) < 0.05 * fine["peak_stress"]  # few increments, but no other thing


def test_drive_shows_the_ends_of_the_segments(run):
    result = run("drive", "a.card.toml", "p.path.toml")
    assert result.status == 0
    assert "resin [a], revision 2 on pull, dwell, quench (uniaxial stress" in result.words
    for heading in ("segment", "time [s]", "[degC]", "e11", "s11 [MPa]", "quench (1)", "heat (2)"):
        assert heading in result.out
    assert "s22" not in result.out  # free sides bear nothing


def test_drive_tells_faults_of_card_and_path_at_once(run, here):
    (here / "x.path.toml").write_text(PATH.replace("strain = 0.01", "strian = 0.01"))
    result = run("drive", "missing.card.toml", "x.path.toml")
    assert (result.status, len(result.lines)) == (2, 2)
    assert result.lines[1].startswith("x.path.toml: segment[1].strian: ")
    assert result.lines[1].endswith("write 'strain'")


def test_drive_into_the_pole_says_where(run, here):
    (here / "cold.path.toml").write_text(PATH.replace("temperature = 70.0", "temperature = 10.0"))
    assert_refused(run("drive", "a.card.toml", "cold.path.toml"), "shift law wlf", "pole")


@pytest.mark.parametrize(
    ("arguments", "parts"),
    [
        (("--shift-rule", "centre"), ("unknown shift rule 'centre'", "mean-log")),
        (("--recursion", "euler"), ("unknown recursion 'euler'", "backward-euler")),
        (("--keep", "none"), ("`--keep` must be all, ends or a whole number",)),
        (("--keep", "0"), ("`--keep` must be",)),
        (("--keep", "9" * 5000), ("`--keep` must be",)),
        (("--plot", "x.bmp"), ("`--plot` must be a file that ends in .png, .svg, .pdf",)),
        (("--plot", "nowhere/x.png"), ("no folder 'nowhere'",)),
        (("-o", "nowhere/h.csv"), ("nowhere/h.csv: file: found no folder 'nowhere'",)),
        (("--json", "nowhere/h.json"), ("no folder 'nowhere'",)),
        (("--exact", "--recursion", "midpoint"), ("--exact",)),
    ],
)
def test_drive_refuses_options_that_it_cannot_follow(run, arguments, parts):
    result = run("drive", "a.card.toml", "p.path.toml", *arguments)
    assert (result.status, result.out, len(result.lines)) == (2, "", 1)
    for part in parts:
        assert part in result.lines[0]


def test_a_history_too_long_to_keep_says_what_to_do(run, here):
    (here / "long.path.toml").write_text(PATH.replace("increments = 5", "increments = 6000000"))
    assert_refused(run("drive", "a.card.toml", "long.path.toml"), "`--keep` must be ends or a number")


# compare


def test_compare_of_a_card_with_itself_is_identical(data):
    found, status = data("compare", "a.card.toml", "a.card.toml")
    assert status == 0
    assert_envelope(found, "compare", "holds")
    assert found["same"] == "identical"
    assert found["shift"]["largest_difference_decades"] == 0.0
    assert len(found["paths"]) > 10
    assert found["slips"] == []


def test_compare_finds_two_per_cent_and_judges_by_the_tolerance(data):
    for tolerance, same, status in (
        ("1%", "different", 1),
        ("0.03", "within tolerance", 0),
        ("3 %", "within tolerance", 0),
    ):
        found, got = data("compare", "a.card.toml", "soft.card.toml", "--path", "p.path.toml", "--tolerance", tolerance)
        assert (found["same"], got) == (same, status)
        (path,) = found["paths"]
        assert set(path) >= {"name", "largest_difference", "relative", "at", "holds"}
        assert set(path["at"]) == {"segment", "time", "temperature"}
        assert path["relative"] == pytest.approx(0.02, rel=1e-6)  # every modulus 2 % down
        assert path["holds"] is (status == 0)
        assert set(found["shift"]) >= {"largest_difference_decades", "at_temperature"}
        assert all(set(slip) >= {"id", "explanation", "remaining"} for slip in found["slips"])


def test_compare_says_its_verdict_first(run):
    path = ("--path", "p.path.toml")
    same, other = (run("compare", "a.card.toml", card, *path) for card in ("a.card.toml", "soft.card.toml"))
    assert same.out.startswith("holds: resin [a], revision 2 and resin [a], revision 2 are identical to rounding")
    assert (same.status, other.status) == (0, 1)
    assert other.out.startswith("falls short: ")
    assert "are different: 2 % of the peak stress apart on path 'pull, dwell, quench'" in other.words


def test_compare_takes_several_paths(data, here):
    (here / "q.path.toml").write_text(PATH.replace("pull, dwell", "haul, dwell"))
    found, _ = data("compare", "a.card.toml", "a.card.toml", "--path", "p.path.toml", "--path", "q.path.toml")
    assert [path["name"] for path in found["paths"]] == ["pull, dwell, quench", "haul, dwell, quench"]


@pytest.mark.parametrize("tolerance", ["0", "-1%", "one", "nan", "inf", "%", "1e99"])
def test_compare_refuses_a_tolerance_that_is_none(run, tolerance):
    assert_refused(
        run("compare", "a.card.toml", "a.card.toml", "--tolerance", tolerance), "`--tolerance` must be a number > 0"
    )


def test_compare_of_a_card_that_is_no_material_is_an_input_error(run):
    result = run("compare", "a.card.toml", "bad.card.toml")
    assert (result.status, result.out) == (2, "")
    assert all(line.startswith("bad.card.toml: ") for line in result.lines)


# files and usage


def test_json_goes_to_a_file_and_the_words_to_standard_output(run, here):
    result = run("check", "a.card.toml", "--json", "out.json")
    assert result.out.startswith("holds: ")
    assert json.loads((here / "out.json").read_text())["command"] == "check"
    assert [path.name for path in here.iterdir() if path.name.endswith(".part")] == []


@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
def test_pictures_are_written_in_every_format(run, here, ending):
    assert run("drive", "a.card.toml", "p.path.toml", "--plot", f"x.{ending}").status == 0
    start = {"png": b"\x89PNG", "svg": b"<?xml", "pdf": b"%PDF"}[ending]
    assert (here / f"x.{ending}").read_bytes().startswith(start)


def test_a_picture_takes_names_with_dollars_and_foreign_letters(run, here):
    odd = "cost $x$ \\\\frac{ [b] 漢 :smile:"
    (here / "odd.card.toml").write_text(CARD.replace("resin [a]", odd), encoding="utf-8")
    (here / "odd.path.toml").write_text(PATH.replace("pull, dwell, quench", odd), encoding="utf-8")
    assert run("drive", "odd.card.toml", "odd.path.toml", "--plot", "x.png").status == 0
    result = run("compare", "odd.card.toml", "soft.card.toml", "--path", "odd.path.toml", "--plot", "y.png")
    assert result.status == 1
    assert ":smile:" in result.out
    assert (here / "y.png").stat().st_size > 10_000


@pytest.mark.parametrize(
    ("arguments", "parts"),
    [
        ((), ("Missing command",)),
        (("prove",), ("No such command 'prove'",)),
        (("check",), ("Missing argument 'CARD...'",)),
        (("check", "a.card.toml", "--verbose"), ("No such option", "--verbose")),
        (("convert", "a.card.toml", "-o", "n.toml"), ("Missing option", "--to")),
        (("convert", "a.card.toml", "--to", "vft"), ("Missing option", "--output")),
        (("convert", "a.card.toml", "--to", "table", "--points", "six", "-o", "n.toml"), ("--points", "valid integer")),
        (("convert", "a.card.toml", "--to", "vft", "--range", "1"), ("--range",)),
        (("drive", "a.card.toml"), ("Missing argument 'PATH'",)),
        (("compare", "a.card.toml"), ("Missing argument 'CARD_B'",)),
        (("drive", "a.card.toml", "p.path.toml", "x"), ("unexpected extra argument",)),
    ],
)
def test_wrong_usage_is_one_line_and_exit_2(run, arguments, parts):
    assert_refused(run(*arguments), *parts)


@pytest.mark.parametrize("command", ["check", "convert", "drive", "compare"])
def test_every_command_has_help_with_an_example(run, command):
    result = run(command, "--help")
    assert (result.status, result.err) == (0, "")
    assert f"cardproof {command} cardproof-demo/" in result.words


def test_help_lists_the_commands_and_the_exit_status(run):
    result = run("--help")
    assert result.status == 0
    for word in ("check", "convert", "drive", "compare", "demo", "Exit status: 0 it holds, 1"):
        assert word in result.words


def test_version_is_shown(run):
    assert run("--version").out == f"cardproof {__version__}\n"


# as a process of its own


def process(here: Path, *arguments: str, **given: object) -> subprocess.CompletedProcess:
    command = [sys.executable, "-m", "drivers.cli", *arguments]
    root = Path(__file__).parents[2]
    environment = {"PYTHONPATH": str(root), "PATH": "", "PYTHONIOENCODING": "ascii"}
    return subprocess.run(command, cwd=here, capture_output=True, timeout=120, env=environment, check=False, **given)  # type: ignore[call-overload]


def test_a_process_ends_with_the_status_of_its_verdict(here):
    assert process(here, "check", "a.card.toml").returncode == 0
    assert process(here, "check", "bad.card.toml").returncode == 1
    refused = process(here, "check", "missing.card.toml")
    assert (refused.returncode, refused.stdout) == (2, b"")
    assert (
        refused.stderr
        == b"missing.card.toml: file: found nothing, expected a file of this name; check the spelling and the folder\n"
    )


def test_a_process_writes_only_json_to_standard_output_when_asked(here):
    done = process(here, "drive", "a.card.toml", "p.path.toml", "--json", "-")
    assert (done.returncode, done.stderr) == (0, b"")
    assert json.loads(done.stdout)["rows"] == ROWS


def test_a_name_that_the_terminal_cannot_spell_is_no_reason_to_fail(here):
    (here / "é.card.toml").write_text(CARD.replace("resin", "r\u00e9sine \u6f22"), encoding="utf-8")
    done = process(here, "check", "é.card.toml")
    assert (done.returncode, done.stderr) == (0, b"")
    assert b"r\\xe9sine \\u6f22" in done.stdout


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs a device that is always full")
def test_a_full_disk_is_one_line_and_no_verdict(here):
    with open("/dev/full", "w") as full:
        done = subprocess.run(
            [sys.executable, "-m", "drivers.cli", "check", "a.card.toml", "--json", "-"],
            cwd=here, stdout=full, stderr=subprocess.PIPE, timeout=120, check=False,
            env={"PYTHONPATH": str(Path(__file__).parents[2]), "PATH": ""},
        )  # fmt: skip
    assert done.returncode == 2
    assert done.stderr == b"cardproof: standard output: No space left on device\n"


def test_a_reader_that_leaves_early_is_no_verdict_either(here):
    child = subprocess.Popen(
        [sys.executable, "-m", "drivers.cli", "check", "a.card.toml", "--json", "-"],
        cwd=here, stdout=subprocess.PIPE, stderr=subprocess.PIPE,
        env={"PYTHONPATH": str(Path(__file__).parents[2]), "PATH": ""},
    )  # fmt: skip
    assert child.stdout is not None
    assert child.stderr is not None
    child.stdout.close()
    assert child.wait(timeout=120) == 141
    assert child.stderr.read() == b""
    child.stderr.close()
