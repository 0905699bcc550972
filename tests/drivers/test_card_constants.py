from __future__ import annotations

import pytest

from drivers.card_constants import constants, in_units_of, with_constants
from matlib.card import parse_card
from matlib.errors import FileError
from tests.baselines import sound
from tests.cards import changed


def test_every_constant_of_a_card_has_a_key_a_value_and_a_unit() -> None:
    card = sound({"shift.outside": "hold"})
    found = {key: (c.value, c.unit_name(card)) for key, c in constants(card).items()}
    assert found["elastic.E"] == (3000.0, "MPa")
    assert found["elastic.nu"] == (0.35, "")
    assert found["prony.shear[3].time"] == (1.0, "s")
    assert found["prony.shear[3].fraction"] == (0.2, "")
    assert found["shift.T_ref"] == (80.0, "degC")
    assert found["shift.C2"] == (161.0, "K")
    assert found["shift.measured[2]"] == (130.0, "degC")
    assert found["expansion.alpha"] == (6.2e-5, "1/K")
    assert not [key for key in found if key.startswith(("name", "note", "service", "units"))]


def test_a_measured_range_that_changes_no_response_is_no_constant() -> None:
    assert not [key for key in constants(sound()) if "measured" in key or "outside" in key]


def test_tables_polynomials_and_crossovers_have_keys_for_every_number() -> None:
    points = sound({"shift": {"law": "table", "T_ref": 80.0, "points": [[60.0, 1.0], [100.0, -1.0]]}})
    assert constants(points)["shift.points[2].T"].value == 100.0
    assert constants(points)["shift.points[2].log10_a"].value == -1.0
    polynomial = {"law": "polynomial", "T_ref": 80.0, "coefficients": [-0.05, 1e-4]}
    found = constants(sound({"shift": polynomial}))
    assert found["shift.coefficients[2]"].unit_name(sound()) == "1/K^2"
    wlf = {"law": "wlf", "T_ref": 80.0, "C1": 14.2, "C2": 161.0}
    crossover = {"law": "crossover", "at": 80.0, "below": polynomial, "above": wlf}
    keys = constants(sound({"shift": crossover}))
    assert {"shift.at", "shift.below.coefficients[1]", "shift.above.C1"} <= keys.keys()


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("elastic.E", 3e9 / 6894.757293168361),  # psi
        ("prony.shear[5].time", 1e8 / 60.0),
        ("shift.T_ref", 176.0),  # 80 degC in degF
        ("shift.C2", 161.0 * 1.8),
        ("expansion.alpha", 6.2e-5 / 1.8),
        ("prony.shear[5].fraction", 0.1),
    ],
)
def test_a_constant_is_written_in_another_cards_units(key: str, value: float) -> None:
    other = sound({"units": {"stress": "psi", "time": "min", "temperature": "degF"}})
    # A few roundings, and those of a temperature far from absolute zero.
    assert in_units_of(other, constants(sound())[key], sound()) == pytest.approx(value, rel=1e-13)


def test_a_coefficient_scales_with_the_power_of_its_temperature_unit() -> None:
    shift = {"law": "polynomial", "T_ref": 80.0, "coefficients": [-0.05, 1.8e-4]}
    card, other = sound({"shift": shift}), sound({"units.temperature": "degF"})
    assert in_units_of(other, constants(card)["shift.coefficients[2]"], card) == pytest.approx(1e-4 / 1.8, rel=1e-14)


def test_absolute_fractions_are_stresses() -> None:
    absolute = changed({"prony.relative_to": "absolute", "prony.shear": [[1.0, 100.0]], "prony.bulk": [[1.0, 50.0]]})
    card = parse_card(absolute, "a")
    assert constants(card)["prony.shear[1].fraction"].unit_name(card) == "MPa"


def test_a_card_takes_other_values_and_keeps_the_rest() -> None:
    card = sound()
    other = with_constants(card, {"prony.shear[3].fraction": 0.21, "shift.C1": 15.0})
    assert constants(other)["prony.shear[3].fraction"].value == 0.21
    assert constants(other)["shift.C1"].value == 15.0
    assert constants(card)["shift.C1"].value == 14.2
    same = {key: c.value for key, c in constants(other).items() if key not in ("prony.shear[3].fraction", "shift.C1")}
    assert same.items() <= {key: c.value for key, c in constants(card).items()}.items()


def test_values_that_no_card_may_have_are_refused() -> None:
    with pytest.raises(FileError, match=r"shift\.C1"):
        with_constants(sound(), {"shift.C1": float("nan")})
    with pytest.raises(KeyError):
        with_constants(sound(), {"shift.C9": 1.0})
