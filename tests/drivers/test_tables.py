"""Tables on the terminal: what they say, number by number."""

import dataclasses
import io

import numpy as np
import pytest
from rich.console import Console, RenderableType

from drivers.difference import Difference, Where
from drivers.history import History
from drivers.path import MODES, Path, Segment
from drivers.report.data import comparison_data
from drivers.report.tables import (
    ROWS_SHOWN,
    comparison_tables,
    conversion_tables,
    findings_table,
    history_tables,
    percent,
    place_text,
    temperature_text,
    time_text,
)
from drivers.studies.compare import Comparison, PathComparison, ShiftDifference
from matlib.admissibility import Finding
from matlib.card import Card, read_card
from matlib.card_conversion import convert_card
from matlib.units import STRESS, TEMPERATURE
from tests.drivers.files import CARD


@pytest.fixture
def card(tmp_path) -> Card:
    file = tmp_path / "a.card.toml"
    file.write_text(CARD)
    return read_card(file)


def text_of(parts: list[RenderableType]) -> str:
    """What a wide terminal without colours shows."""
    console = Console(file=io.StringIO(), width=200, markup=False, emoji=False, highlight=False)
    for part in parts:
        console.print(part)
    assert isinstance(console.file, io.StringIO)
    return "\n".join(line.rstrip() for line in console.file.getvalue().splitlines())


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (0.0, "0 s"),
        (2e-6, "2e-06 s"),
        (119.0, "119 s"),
        (120.0, "2 min"),
        (3600.0, "1 h"),
        (86400.0, "24 h"),
        (172800.0, "2 d"),
    ],
)
def test_a_time_is_told_in_the_unit_that_suits_it(seconds, text):
    assert time_text(seconds) == text


def test_fractions_and_temperatures_are_short():
    assert [percent(x) for x in (0.0, 1e-16, 0.0123456, 1.5)] == ["0 %", "1e-14 %", "1.23 %", "150 %"]
    assert temperature_text(353.15, TEMPERATURE["degC"]) == "80 degC"
    assert (
        place_text(Where(segment="quench", time=5400.0, temperature=273.15), TEMPERATURE["degF"])
        == "quench, 1.5 h, 32 degF"
    )


def test_findings_are_counted_and_listed_errors_first(card):
    findings = [
        Finding(id="one-thing", severity="error", message="Something [x] is wrong."),
        Finding(id="other-thing", severity="note", message="Good to know."),
        Finding(id="third-thing", severity="note", message="Good to know too."),
    ]
    lines = text_of(findings_table(card, findings)).splitlines()
    assert lines[0] == f"falls short: resin [a], revision 2 ({card.file}): 1 error, 2 notes"
    assert lines[1].split() == ["severity", "finding", "what", "and", "what", "to", "do"]
    assert lines[2].split(maxsplit=2) == ["error", "one-thing", "Something [x] is wrong."]
    assert text_of(findings_table(card, [])) == f"holds: resin [a], revision 2 ({card.file}): no findings"


def test_an_exact_conversion_says_so_and_lists_its_constants(card):
    lines = text_of(
        conversion_tables(convert_card(card, "vft", T_ref=333.15), "new.toml", card.temperature_unit)
    ).splitlines()
    assert lines[0] == f"exact: new.toml says what {card.file} says, to rounding"
    rows = {line.split()[0]: line.split()[1] for line in lines[2:] if len(line.split()) in (2, 3)}
    assert float(rows["T_inf"]) == pytest.approx(19.0)  # 80 degC - 61 K
    assert float(rows["T_ref"]) == 60.0
    assert any(line.startswith("times multiplied by") for line in lines)


def test_an_inexact_conversion_says_how_far_off_where_and_over_what(card):
    text = text_of(conversion_tables(convert_card(card, "arrhenius"), "new.toml", card.temperature_unit))
    assert text.startswith("inexact: new.toml is at most ")
    assert "decades of a_T off at " in text
    assert ", over 60 degC to 130 degC" in text


def history(rows: int = 3) -> History:
    """Stress s11 of 0, 1, 2, ... MPa under e11 of 0, 0.1 %, 0.2 %, ..."""
    strain, stress, steps = np.zeros((rows, 6)), np.zeros((rows, 6)), np.arange(float(rows))
    strain[:, 0], stress[:, 0] = 1e-3 * steps, 1e6 * steps
    stress[:, 1] = 1e-9  # rounding
    return History(
        segment=("start", *(f"s{k}" for k in range(1, rows))),
        time=60.0 * steps,
        temperature=np.full(rows, 353.15),
        reduced_time=None,
        strain=strain,
        stress=stress,
        peak_stress=1e6 * (rows - 1),
    )


def test_a_history_shows_the_components_that_move_with_their_units():
    lines = text_of(history_tables(history(), "title [x]", STRESS["MPa"], TEMPERATURE["degC"])).splitlines()
    assert lines[0] == "title [x]"
    assert lines[1].split("  ")[0] == "segment"
    for heading in ("time [s]", "[degC]", "e11", "s11 [MPa]"):
        assert heading in lines[1]
    assert "s22" not in lines[1]
    assert lines[-1].split() == ["s2", "120", "80", "0.002", "2"]


def test_a_long_history_is_cut_in_the_middle_and_a_bound_is_shown():
    long = dataclasses.replace(history(100), bound=np.full(100, 2e3))
    lines = text_of(history_tables(long, "t", STRESS["kPa"], TEMPERATURE["K"])).splitlines()
    assert "bound [kPa]" in lines[1]
    assert len(lines) == 2 + ROWS_SHOWN + 1
    assert set(lines[2 + ROWS_SHOWN // 2].split()) == {"..."}
    assert lines[-1].split()[0] == "s99"
    assert lines[-1].split()[-1] == "2"


def result(name: str, relative: float | None, *, holds: bool = True, identical: bool = False) -> PathComparison:
    """What one path gave."""
    pull = Segment(
        label="pull",
        durations=np.ones(1),
        temperatures=None,
        targets=np.zeros((1, 6)),
        stress_controlled=np.zeros(6, dtype=bool),
        held=np.zeros(6, dtype=bool),
    )
    path = Path(name=name, mode=MODES["uniaxial strain"], start_temperature=353.15, parts=(pull,))
    at = Where(segment="pull", time=7200.0, temperature=353.15)
    difference = None
    if relative is not None:
        difference = Difference(quantity="stress", component="s11", value=1e6 * relative, relative=relative, at=at)
    return PathComparison(
        path=path, difference=difference, rounding=3e-14, identical=identical, bound=2e-9, estimated=False, holds=holds,
        first=None, second=None, reason="" if difference else "second card: no shift factor",
    )  # fmt: skip


def comparison(same: str, *paths: PathComparison) -> Comparison:
    shift = ShiftDifference(decades=0.25, temperature=333.15)
    return Comparison(same=same, tolerance=0.01, shift=shift, paths=paths)  # type: ignore[arg-type]


def lines_of(card: Card, given: Comparison) -> list[str]:
    return text_of(comparison_tables(given, card, card)).splitlines()


def test_cards_that_differ_are_told_first_how_much_and_where(card):
    given = comparison("different", result("creep", 0.005), result("pull at 80", 0.125, holds=False))
    lines = lines_of(card, given)
    assert lines[0].startswith("falls short: resin [a], revision 2 and resin [a], revision 2 are different: ")
    assert lines[0].endswith("12.5 % of the peak stress apart on path 'pull at 80'")
    assert lines[1] == "Shift laws, both taken as 1 at one temperature: at most 0.25 decades apart, at 60 degC"
    assert "guaranteed to 2e-07 %" in lines[2]
    worst, other = lines[-2:]
    assert worst.split("  ")[0] == "pull at 80"
    for part in ("12.5 %", "s11", "pull, 2 h, 80 degC", "differs"):
        assert part in worst
    assert other.startswith("creep")
    assert other.endswith("holds")


def test_two_cards_of_one_name_are_told_apart_by_their_files(card):
    other = dataclasses.replace(card, file="other.card.toml")
    lines = text_of(comparison_tables(comparison("different", result("creep", 0.5, holds=False)), card, other))
    assert lines.startswith(f"falls short: {card.name} ({card.file}) and {card.name} (other.card.toml) are different: ")


@pytest.mark.parametrize("width", [60, 200])
def test_words_of_a_comparison_stay_whole_on_a_narrow_terminal(card, width):
    given = comparison("different", result("pull of 1.6e+05 s, 125 degC", 0.125, holds=False), result("creep", 0.005))
    console = Console(width=width, file=io.StringIO(), highlight=False)
    console.print(comparison_tables(given, card, card)[-1])
    text = console.file.getvalue()
    assert all(len(line) <= width for line in text.splitlines())
    for word in ("difference", "largest", "pull, 2 h, 80", "differs", "holds", "12.5 %"):
        assert word in text


def test_cards_within_the_tolerance_are_told_by_how_much(card):
    lines = lines_of(card, comparison("within tolerance", result("creep", 0.005)))
    assert lines[0].startswith("holds: ")
    assert "within the tolerance of 1 %: at most 0.5 % of the peak stress apart on path 'creep'" in lines[0]


def test_identical_cards_are_told_with_the_bound_of_rounding(card):
    lines = lines_of(card, comparison("identical", result("creep", 1e-15, identical=True)))
    assert "identical to rounding (largest difference 1e-13 %, rounding bound 3e-12 %)" in lines[0]
    assert lines[-1].endswith("identical")


def test_a_path_without_an_answer_is_the_worst_and_says_why(card):
    given = comparison("different", result("creep", 0.5, holds=False), result("quench", None, holds=False))
    lines = lines_of(card, given)
    assert lines[0].endswith("are different: no answer on path 'quench'")
    (row,) = [line for line in lines if line.startswith("quench")]
    assert "no answer" in row
    assert "second card: no shift factor" in row


def test_json_of_a_comparison_has_nothing_where_there_is_no_number(card):
    data = comparison_data(comparison("different", result("quench", None, holds=False)), card, card, ())
    (path,) = data["paths"]
    assert (path["largest_difference"], path["relative"], path["at"], path["holds"]) == (None, None, None, False)
    assert path["reason"] == "second card: no shift factor"
