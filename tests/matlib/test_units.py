import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from matlib.errors import ParameterError, UnknownNameError
from matlib.units import ENERGY, GAS_CONSTANT, QUANTITIES, STRESS, TEMPERATURE, TIME, find_unit, parse_temperature

ALL_UNITS = [pytest.param(unit, id=unit.name) for table in QUANTITIES.values() for unit in table.values()]
SUBNORMAL = 1e-300  # smaller numbers may lose digits when they are scaled down
EXACT = 1e-15  # a product or quotient of two or three numbers, each rounded once


# The international pound, inch and standard gravity; the thermochemical calorie (common practice,
# no source).
@pytest.mark.parametrize(
    ("unit", "size"),
    [
        (STRESS["Pa"], 1.0),
        (STRESS["kPa"], 1e3),
        (STRESS["MPa"], 1e6),
        (STRESS["GPa"], 1e9),
        (STRESS["psi"], 0.45359237 * 9.80665 / 0.0254**2),
        (STRESS["ksi"], 1e3 * 0.45359237 * 9.80665 / 0.0254**2),
        (TIME["s"], 1.0),
        (TIME["ms"], 1e-3),
        (TIME["us"], 1e-6),
        (TIME["min"], 60.0),
        (TIME["h"], 60.0 * 60.0),
        (TIME["d"], 24.0 * 60.0 * 60.0),
        (ENERGY["J/mol"], 1.0),
        (ENERGY["kJ/mol"], 1e3),
        (ENERGY["kcal/mol"], 4184.0),
    ],
    ids=lambda value: getattr(value, "name", ""),
)
def test_one_unit_has_the_size_that_its_definition_gives(unit, size):
    assert unit.to_si(1.0) == pytest.approx(size, rel=EXACT)


def test_electron_volt_and_gas_constant_follow_from_the_constants_of_2018():
    # Charge, Avogadro and Boltzmann constants are exact since 2019; the units are written to ten digits.
    assert ENERGY["eV"].to_si(1.0) == pytest.approx(1.602176634e-19 * 6.02214076e23, rel=1e-10)
    assert pytest.approx(1.380649e-23 * 6.02214076e23, rel=1e-10) == GAS_CONSTANT


@pytest.mark.parametrize(
    ("unit", "value", "kelvin"),
    [
        ("K", 300.0, 300.0),
        ("degC", 0.0, 273.15),
        ("degC", -273.15, 0.0),
        ("degC", 100.0, 373.15),
        ("degF", 32.0, 273.15),
        ("degF", 212.0, 373.15),
        ("degF", -459.67, 0.0),
        ("degF", -40.0, 233.15),
    ],
)
def test_temperatures_shift_and_scale(unit, value, kelvin):
    assert TEMPERATURE[unit].to_si(value) == pytest.approx(kelvin, rel=EXACT)


@pytest.mark.parametrize(("unit", "kelvin"), [("K", 9.0), ("degC", 9.0), ("degF", 5.0)])
def test_temperature_differences_scale_and_do_not_shift(unit, kelvin):
    assert TEMPERATURE[unit].difference_to_si(9.0) == pytest.approx(kelvin, rel=EXACT)
    assert TEMPERATURE[unit].difference_from_si(kelvin) == pytest.approx(9.0, rel=EXACT)


@pytest.mark.parametrize("unit", ALL_UNITS)
@given(value=st.floats(-1e12, 1e12))
def test_there_and_back_is_the_same(unit, value):
    # the zero point of a temperature scale costs roundings of its own size
    tolerance = 4e-16 * (abs(value) + abs(unit.zero))
    assert abs(unit.from_si(unit.to_si(value)) - value) <= tolerance + SUBNORMAL
    assert unit.difference_from_si(unit.difference_to_si(value)) == pytest.approx(value, rel=EXACT, abs=SUBNORMAL)


def test_arrays_convert_as_numbers_do():
    unit = TEMPERATURE["degF"]
    values = np.array([-40.0, 32.0, 212.0])
    assert unit.to_si(values).tolist() == [unit.to_si(float(v)) for v in values]
    assert unit.from_si(values).tolist() == [unit.from_si(float(v)) for v in values]


@pytest.mark.parametrize("quantity", sorted(QUANTITIES))
@pytest.mark.parametrize("name", ["bar", "mpa", "", None, 3, ["K"]])
def test_an_unknown_unit_is_refused_and_the_known_ones_are_listed(quantity, name):
    with pytest.raises(UnknownNameError) as caught:
        find_unit(quantity, name)
    assert caught.value.known == tuple(QUANTITIES[quantity])
    assert f"unknown {quantity} unit {name!r}: use one of " in str(caught.value)


@pytest.mark.parametrize(
    ("text", "default", "kelvin"),
    [
        ("40degC", "K", 313.15),
        (" 40 degC ", "degF", 313.15),
        ("-40degF", "K", 233.15),
        ("313.15K", "degC", 313.15),
        ("+3.1315e2K", "degC", 313.15),
        (".5degC", "K", 273.65),
        ("5.degC", "K", 278.15),
        ("40", "degC", 313.15),
        ("104", "degF", 313.15),
        ("313.15", "K", 313.15),
    ],
)
def test_a_temperature_takes_its_own_unit_or_the_default(text, default, kelvin):
    assert parse_temperature(text, TEMPERATURE[default]) == pytest.approx(kelvin, rel=EXACT)


@pytest.mark.parametrize(
    "text", ["", "degC", "forty", "40 C", "40degc", "4 0degC", "1e", "nan", "inf", "0x10K", "--4K"]
)
def test_text_that_is_no_temperature_is_refused(text):
    with pytest.raises(ParameterError, match="a temperature such as 40degC"):
        parse_temperature(text, TEMPERATURE["K"])


@pytest.mark.parametrize("text", ["0K", "-273.15degC", "-500degF", "-1K", "1e7K", "1e999K"])
def test_a_temperature_that_cannot_be_is_refused(text):
    with pytest.raises(ParameterError, match="above absolute zero and below 1e6 K"):
        parse_temperature(text, TEMPERATURE["K"])


def test_every_unit_is_found_under_its_own_name():
    for quantity, table in QUANTITIES.items():
        assert all(find_unit(quantity, name) is unit for name, unit in table.items())
        assert all(name == unit.name and math.isfinite(unit.scale) and unit.scale > 0.0 for name, unit in table.items())
