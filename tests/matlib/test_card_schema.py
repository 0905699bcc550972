from typing import Annotated, Literal, get_args, get_origin

import pytest
from pydantic import TypeAdapter, ValidationError

from matlib.card_schema import (
    LARGEST_NUMBER,
    SMALLEST_NUMBER,
    EnergyUnit,
    Number,
    Pair,
    StressUnit,
    TemperatureUnit,
    Terms,
    TimeUnit,
)
from matlib.units import ENERGY, STRESS, TEMPERATURE, TIME


@pytest.mark.parametrize(
    ("annotation", "table"),
    [(StressUnit, STRESS), (TimeUnit, TIME), (TemperatureUnit, TEMPERATURE), (EnergyUnit, ENERGY)],
)
def test_the_units_that_a_card_may_name_are_the_units_there_are(annotation, table):
    assert get_origin(annotation) is Annotated
    literal = get_args(annotation)[0]
    assert get_origin(literal) is Literal
    assert get_args(literal) == tuple(table)


@pytest.mark.parametrize("value", [0.0, -LARGEST_NUMBER, LARGEST_NUMBER, SMALLEST_NUMBER, -SMALLEST_NUMBER, 3])
def test_a_number_may_be_of_any_size_of_the_trade(value):
    assert TypeAdapter(Number).validate_python(value) == value


@pytest.mark.parametrize("value", [1.1e60, -1.1e60, 10**70])
def test_a_number_that_would_overflow_is_refused(value):
    with pytest.raises(ValidationError, match="than or equal to"):
        TypeAdapter(Number).validate_python(value)


@pytest.mark.parametrize("value", [9e-61, -9e-61, 5e-324])
def test_a_number_that_would_underflow_is_refused(value):
    with pytest.raises(ValidationError, match="0, or a number of at least 1e-60 in size"):
        TypeAdapter(Number).validate_python(value)


@pytest.mark.parametrize("values", [[], [1.0], [1.0, 2.0, 3.0]])
def test_a_pair_is_two_numbers(values):
    assert TypeAdapter(Pair).validate_python([1.0, 2.0]) == [1.0, 2.0]
    with pytest.raises(ValidationError):
        TypeAdapter(Pair).validate_python(values)


def test_a_series_has_at_least_one_term_and_at_most_a_thousand():
    assert len(TypeAdapter(Terms).validate_python([[1.0, 0.1]] * 1000)) == 1000
    for terms in ([], [[1.0, 0.1]] * 1001):
        with pytest.raises(ValidationError):
            TypeAdapter(Terms).validate_python(terms)
