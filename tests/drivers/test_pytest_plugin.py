from __future__ import annotations

import subprocess
import sys
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

from drivers.baseline_file import Baseline
from tests.baselines import recorded, written


@pytest.fixture(scope="module")
def baseline() -> Baseline:
    return recorded(names=("relaxation, 60 degC", "creep, 85 degC"))


def run(pytester: pytest.Pytester, *arguments: str) -> pytest.RunResult:
    """The plug-in is found as the installed package offers it."""
    return pytester.runpytest("-p", "no:cacheprovider", *arguments)


def test_each_path_of_a_baseline_beside_a_card_is_a_test(pytester: pytest.Pytester, baseline: Baseline) -> None:
    written(pytester.path, "SR-4", baseline)
    result = run(pytester, "-v")
    result.assert_outcomes(passed=2)
    result.stdout.fnmatch_lines(
        ["SR-4.baseline.json::relaxation, 60 degC PASSED*", "SR-4.baseline.json::creep, 85 degC PASSED*"]
    )


def test_a_failure_says_how_much_where_what_and_which_slip(pytester: pytest.Pytester, baseline: Baseline) -> None:
    written(pytester.path, "SR-4", baseline, {"elastic.E": 3.0})
    result = run(pytester)
    result.assert_outcomes(failed=2)
    result.stdout.fnmatch_lines(
        [
            "*SR-4.baseline.json: relaxation, 60 degC*",
            "sealing resin, revision 2 (*SR-4.card.toml) does not behave as accepted: 99.9 % of the peak stress from "
            "what was recorded on path 'relaxation, 60 degC', where 1 % is accepted",
            "largest: s11 by 29.97 MPa, at step, 0 s, 60 degC",  # 1 % of 3000 MPa, less 1 % of 3 MPa
            "elastic: matters, *elastic.E from 3000 to 3 MPa*",
            "likely slip: stress-unit. elastic.E of *",
        ]
    )
    result.stdout.no_fnmatch_line("*Traceback*")


def test_one_path_can_be_chosen_by_its_name(pytester: pytest.Pytester, baseline: Baseline) -> None:
    written(pytester.path, "SR-4", baseline, {"elastic.E": 3.0})
    result = run(pytester, "-k", "creep")
    result.assert_outcomes(failed=1, deselected=1)
    result.stdout.fnmatch_lines(["largest: e11 by *, at dwell, 100 s, 85 degC"])


def test_a_card_with_no_response_fails_with_the_reason(pytester: pytest.Pytester, baseline: Baseline) -> None:
    written(pytester.path, "SR-4", baseline, {"shift.measured": [70.0, 130.0], "shift.outside": "refuse"})
    result = run(pytester)
    result.assert_outcomes(failed=1, passed=1)
    result.stdout.fnmatch_lines(["*no answer on path 'relaxation, 60 degC': *outside the measured range*"])


def test_a_damaged_baseline_is_one_failing_test_and_the_others_run(
    pytester: pytest.Pytester, baseline: Baseline
) -> None:
    written(pytester.path, "a", baseline)
    written(pytester.path, "b", baseline)
    file = pytester.path / "a.baseline.json"
    file.write_bytes(file.read_bytes().replace(b'"tolerance": 0.01', b'"tolerance": 0.91', 1))
    result = run(pytester)
    result.assert_outcomes(failed=1, passed=2)
    result.stdout.fnmatch_lines(["*a.baseline.json: readable*", "*its digest differs*"])


@pytest.mark.parametrize("content", ["name =", 'name = "x"\n'])
def test_an_unreadable_card_is_one_failing_test(pytester: pytest.Pytester, baseline: Baseline, content: str) -> None:
    written(pytester.path, "a", baseline).write_text(content)
    result = run(pytester)
    result.assert_outcomes(failed=1)
    result.stdout.fnmatch_lines(["*a.card.toml: *"])


def test_a_baseline_whose_card_is_gone_fails(pytester: pytest.Pytester, baseline: Baseline) -> None:
    written(pytester.path, "a", baseline).unlink()
    run(pytester).assert_outcomes(failed=1)


def test_other_peoples_files_of_that_ending_are_left_alone(pytester: pytest.Pytester) -> None:
    (pytester.path / "screenshot.baseline.json").write_text('{"pixels": []}')
    (pytester.path / "x.baseline.json").mkdir()
    run(pytester).assert_outcomes()


def test_paths_of_one_name_are_told_apart(pytester: pytest.Pytester) -> None:
    names = ("creep, 85 degC", "creep, 85 degC")
    written(pytester.path, "a", recorded(names=names))
    result = run(pytester, "-v")
    result.stdout.fnmatch_lines(["*::creep, 85 degC PASSED*", "*::creep, 85 degC (2) PASSED*"])


def test_the_junit_file_has_each_path_with_its_change_and_tolerance(
    pytester: pytest.Pytester, baseline: Baseline
) -> None:
    written(pytester.path, "SR-4", baseline, {"elastic.E": 3090.0})
    run(pytester, "--junitxml=junit.xml")
    cases = ET.parse(pytester.path / "junit.xml").getroot().findall(".//testcase")
    assert [case.get("name") for case in cases] == ["relaxation, 60 degC", "creep, 85 degC"]
    properties = {p.get("name"): float(p.get("value", "nan")) for p in cases[0].findall(".//property")}
    assert properties["relative"] == pytest.approx(0.03, rel=1e-6)  # stress is proportional to E
    assert properties["tolerance"] == 0.01
    failure = cases[0].find("failure")
    assert failure is not None
    assert "3 % of the peak stress" in (failure.text or "")


def test_the_plug_in_can_be_switched_off(pytester: pytest.Pytester, baseline: Baseline) -> None:
    written(pytester.path, "SR-4", baseline)
    run(pytester, "-p", "no:cardproof").assert_outcomes()


def test_the_plug_in_imports_nothing_heavy_until_a_baseline_is_collected(tmp_path: Path) -> None:
    heavy = ("numpy", "scipy", "numba", "pydantic", "rich", "matplotlib", "matlib")
    code = f"import sys, drivers.pytest_plugin; print([name for name in {heavy!r} if name in sys.modules])"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert found.strip() == "[]"
