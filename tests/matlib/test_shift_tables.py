import sys
import textwrap

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.admissibility import check_card
from matlib.errors import FaultyInputError, FileError, ParameterError
from matlib.shift import VFT, WLF, Arrhenius, Crossover, NoShift, Polynomial, Table
from matlib.shift.base import ShiftLaw
from matlib.shift_tables import LAW_TABLES, build_shift, parse_shift, split_range, written_shift
from matlib.units import TEMPERATURE
from tests.cards import changed, read
from tests.strategies import COLD, HOT, LN10, law_constants, shift_laws

units = st.sampled_from(sorted(TEMPERATURE))
each_unit = pytest.mark.parametrize("unit", TEMPERATURE)


def built(table, unit):
    """The law of a ``[shift]`` table, as a card makes it."""
    constants, limits = split_range(table)
    return build_shift(parse_shift(constants), limits, TEMPERATURE[unit])


def assert_same_law(law, other):
    """Equal but for the rounding of temperatures between units, 1e-13 K, where ln a_T changes by up to 5 a kelvin.

    The ends are left out by 1e-9 K, where a law that refuses may refuse a rounding earlier.
    """
    T = np.linspace(COLD + 1e-9, HOT - 1e-9, 101)
    np.testing.assert_allclose(law.ln_shift(T), other.ln_shift(T), rtol=1e-12, atol=1e-11)
    assert type(law) is type(other)
    assert law.name == other.name


@settings(max_examples=300)
@given(law=shift_laws(), unit=units, data=st.data())
def test_each_law_in_each_temperature_unit_is_the_law_in_kelvin(law, unit, data):
    table = data.draw(law_constants(law, unit))
    other = built(table, unit)
    assert_same_law(other, law)
    expected = law.T_ref if table["law"] == "crossover" or "T_ref" in table else NoShift().T_ref
    assert other.T_ref == pytest.approx(expected, rel=1e-14)


@settings(max_examples=300)
@given(law=shift_laws(), unit=units)
def test_a_written_law_reads_back_to_the_same_law(law, unit):
    table = written_shift(law, TEMPERATURE[unit])
    other = built(table, unit)
    assert_same_law(other, law)
    assert other.T_ref == pytest.approx(law.T_ref, rel=1e-14)


# 300 K is 26.85 degC and 80.33 degF; 50 K are 90 degF; a coefficient per kelvin to the k is divided by 1.8 to the k
IN_UNIT = {
    "K": {"T_ref": 300.0, "50 K": 50.0, "250 K": 250.0, "340 K": 340.0, "1 K": 1.0},
    "degC": {"T_ref": 26.85, "50 K": 50.0, "250 K": -23.15, "340 K": 66.85, "1 K": 1.0},
    "degF": {"T_ref": 80.33, "50 K": 90.0, "250 K": -9.67, "340 K": 152.33, "1 K": 1.8},
}


@each_unit
def test_wlf_takes_c2_as_a_difference_and_either_base(unit):
    n = IN_UNIT[unit]
    law = built({"law": "wlf", "T_ref": n["T_ref"], "C1": 10.0, "C2": n["50 K"]}, unit)
    assert isinstance(law, WLF)
    assert float(law.ln_shift(340.0)) == pytest.approx(-LN10 * 10.0 * 40.0 / 90.0, rel=1e-13)
    law = built({"law": "wlf", "T_ref": n["T_ref"], "C1": 10.0, "C2": n["50 K"], "base": "e"}, unit)
    assert float(law.ln_shift(340.0)) == pytest.approx(-10.0 * 40.0 / 90.0, rel=1e-13)


@each_unit
@pytest.mark.parametrize(
    "energy",
    [
        {"activation_energy": 83.14462618},
        {"activation_energy": 83144.62618, "energy_unit": "J/mol"},
        {"activation_energy": 83144.62618 / 4184.0, "energy_unit": "kcal/mol"},
        {"activation_energy": 83144.62618 / 96485.33212, "energy_unit": "eV"},
        {"activation_energy": 80.0, "gas_constant": 8.0},
    ],
    ids=["kJ/mol", "J/mol", "kcal/mol", "eV", "R"],
)
def test_ten_thousand_kelvin_in_any_energy_unit_are_ten_thousand_kelvin(unit, energy):
    n = IN_UNIT[unit]
    law = built({"law": "arrhenius", "T_ref": n["T_ref"]} | energy, unit)
    assert isinstance(law, Arrhenius)
    assert float(law.ln_shift(340.0)) == pytest.approx(1e4 * (1.0 / 340.0 - 1.0 / 300.0), rel=1e-12)
    law = built({"law": "vft", "T_ref": n["T_ref"], "T_inf": n["250 K"]} | energy, unit)
    assert isinstance(law, VFT)
    assert float(law.ln_shift(340.0)) == pytest.approx(1e4 * (1.0 / 90.0 - 1.0 / 50.0), rel=1e-12)


@each_unit
def test_vft_takes_b_as_a_difference(unit):
    n = IN_UNIT[unit]
    law = built({"law": "vft", "T_ref": n["T_ref"], "T_inf": n["250 K"], "B": 20.0 * n["50 K"]}, unit)
    assert float(law.ln_shift(340.0)) == pytest.approx(1000.0 / 90.0 - 1000.0 / 50.0, rel=1e-13)


@each_unit
def test_a_polynomial_takes_coefficients_per_degree_of_the_card(unit):
    n = IN_UNIT[unit]
    coefficients = [-0.1 / n["1 K"], 1e-4 / n["1 K"] ** 2]
    law = built({"law": "polynomial", "T_ref": n["T_ref"], "coefficients": coefficients}, unit)
    assert isinstance(law, Polynomial)
    assert float(law.ln_shift(340.0)) == pytest.approx(LN10 * (-4.0 + 0.16), rel=1e-12)


@each_unit
def test_a_table_takes_points_in_the_unit_of_the_card(unit):
    n = IN_UNIT[unit]
    points = [[n["340 K"], -4.0], [n["T_ref"], 0.0]]
    law = built({"law": "table", "T_ref": n["T_ref"], "points": points}, unit)
    assert isinstance(law, Table)
    assert float(law.ln_shift(320.0)) == pytest.approx(-2.0 * LN10, rel=1e-13)


@each_unit
def test_a_crossover_is_referred_to_the_upper_law_unless_it_says_otherwise(unit):
    n = IN_UNIT[unit]
    wlf = {"law": "wlf", "T_ref": n["T_ref"], "C1": 10.0, "C2": n["50 K"]}
    table = {"law": "crossover", "at": n["T_ref"], "below": {"law": "none"}, "above": wlf}
    law = built(table, unit)
    assert isinstance(law, Crossover)
    np.testing.assert_allclose(law.ln_shift([280.0, 340.0]), [0.0, -LN10 * 10.0 * 40.0 / 90.0], rtol=1e-13, atol=1e-13)
    moved = built(table | {"T_ref": n["340 K"]}, unit)
    np.testing.assert_allclose(moved.ln_shift([280.0, 340.0]), [LN10 * 10.0 * 40.0 / 90.0, 0.0], rtol=1e-13, atol=1e-13)


def test_an_energy_is_written_in_the_unit_that_it_was_read_in():
    table = {"law": "arrhenius", "T_ref": 300.0, "activation_energy": 1.5, "energy_unit": "eV", "gas_constant": 8.31}
    parsed = parse_shift(table)
    assert written_shift(parsed.build(TEMPERATURE["K"]), TEMPERATURE["K"], like=parsed) == pytest.approx(table)


def test_every_law_of_the_format_has_a_table():
    assert list(LAW_TABLES) == ["none", "wlf", "arrhenius", "vft", "polynomial", "table", "crossover"]


class Straight(ShiftLaw):
    """A law that the format does not know."""

    name = "straight"
    T_ref = 300.0

    def ln_shift(self, T):
        return 300.0 - np.asarray(T)


def test_a_law_that_the_format_does_not_know_cannot_be_written():
    with pytest.raises(ParameterError, match="one that a card can be written with: none, wlf"):
        written_shift(Straight(), TEMPERATURE["K"])


@pytest.mark.parametrize(
    ("table", "key", "found", "expected"),
    [
        ({"law": "vft", "T_ref": 1.0, "T_inf": 0.0}, "shift", "neither B nor activation_energy", "either B or"),
        (
            {"law": "vft", "T_ref": 1.0, "T_inf": 0.0, "B": 1.0, "activation_energy": 1.0},
            "shift",
            "B and activation_energy",
            "either B or",
        ),
        (
            {"law": "arrhenius", "T_ref": 1.0, "activation_energy": 1.0, "energy_unit": "cal"},
            "shift.energy_unit",
            "'cal'",
            "one of 'J/mol', 'kJ/mol', 'kcal/mol' or 'eV'",
        ),
        ({"law": "polynomial", "T_ref": 1.0, "coefficients": []}, "shift.coefficients", "[]", "at least 1 entries"),
        (
            {"law": "polynomial", "T_ref": 1.0, "coefficients": [1.0] * 13},
            "shift.coefficients",
            "[1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1...",
            "at most 12 entries",
        ),
        ({"law": "table", "T_ref": 1.0, "points": [[1.0, 0.0]]}, "shift.points", "[[1.0, 0.0]]", "at least 2 entries"),
        ({"law": ["wlf"]}, "shift.law", "['wlf']", "one of none, wlf"),
    ],
)
def test_a_table_that_does_not_stand_is_refused(table, key, found, expected):
    with pytest.raises(FaultyInputError) as caught:
        parse_shift(table)
    (fault,) = caught.value.faults
    assert (fault.key, fault.found) == (key, found)
    assert fault.expected.startswith(expected)


@pytest.mark.parametrize("coefficients", [[-0.1, 1e-320], [-0.1, 0.0, -1e-300], [-0.1, 1e-60, 1e-320]])
def test_a_coefficient_that_is_lost_in_rounding_turns_nothing(coefficients):
    law = built({"law": "polynomial", "T_ref": 300.0, "coefficients": coefficients}, "K")
    assert law.knots == ()
    assert float(law.ln_shift(310.0)) == pytest.approx(-LN10, rel=1e-14)


PLUGIN = """
    from matlib.errors import ParameterError
    from matlib.shift import Polynomial

    def falling(constants, temperature_unit):
        if not constants["slope"] < 0.0:
            raise ParameterError("slope", "< 0 decades a degree", constants["slope"])
        slope = constants["slope"] / temperature_unit.difference_to_si(1.0)
        return Polynomial(coefficients=[slope], T_ref=temperature_unit.to_si(constants["T_ref"]))
"""


@pytest.fixture
def plugin(tmp_path, monkeypatch):
    """A distribution on the path, as an installer leaves it, with one law."""
    folder = tmp_path / "site"
    info = folder / "falling_law-1.0.dist-info"
    info.mkdir(parents=True)
    (info / "METADATA").write_text("Metadata-Version: 2.1\nName: falling-law\nVersion: 1.0\n")
    (info / "entry_points.txt").write_text("[cardproof.shift_laws]\nfalling = falling_law:falling\n")
    (folder / "falling_law.py").write_text(textwrap.dedent(PLUGIN))
    monkeypatch.syspath_prepend(folder)
    yield
    sys.modules.pop("falling_law", None)


@pytest.mark.usefixtures("plugin")
def test_a_law_of_somebody_else_stands_in_a_card_like_any_other(tmp_path):
    changes = {"units.temperature": "degF", "service.temperature": [150.0, 200.0]}
    shift = {"law": "falling", "slope": -0.1, "T_ref": 80.33, "measured": [140.0, 240.0], "outside": "refuse"}
    law = read(tmp_path, changed({"shift": shift} | changes)).material().shift
    assert float(law.ln_shift(350.0)) == pytest.approx(-9.0 * LN10, rel=1e-12)
    with pytest.raises(ValueError, match="outside the measured range"):
        law.ln_shift(300.0)


@pytest.mark.usefixtures("plugin")
def test_what_a_law_of_somebody_else_refuses_is_a_fault_of_the_card(tmp_path):
    card = read(tmp_path, changed({"shift": {"law": "falling", "slope": 0.1, "T_ref": 80.0}}))
    with pytest.raises(FileError, match=r"shift\.slope: found 0\.1, expected < 0 decades a degree"):
        card.material()
    assert [(finding.id, finding.severity) for finding in check_card(card)] == [("shift-law", "error")]


@pytest.mark.usefixtures("plugin")
def test_a_law_of_somebody_else_that_breaks_is_a_fault_of_the_card(tmp_path):
    card = read(tmp_path, changed({"shift": {"law": "falling", "T_ref": 80.0}}))
    with pytest.raises(FileError, match=r"shift\.law: found .*plug-in falling_law:falling, which raised KeyError"):
        card.material()
    assert [(finding.id, finding.severity) for finding in check_card(card)] == [("shift-law", "error")]


@pytest.mark.usefixtures("plugin")
def test_an_unknown_law_lists_those_of_others_too(tmp_path):
    with pytest.raises(FileError, match=r"shift\.law: found 'rising', expected one of none, .*, falling"):
        read(tmp_path, changed({"shift": {"law": "rising"}}))
