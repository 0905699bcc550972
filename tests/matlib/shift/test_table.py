import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.errors import ParameterError
from matlib.shift import Table


def test_it_passes_through_its_points_in_whatever_order_they_are_given():
    law = Table(T=[350.0, 310.0, 330.0], log10_a=[-2.0, 3.0, 0.5], T_ref=330.0)
    assert law.knots == (310.0, 330.0, 350.0)
    np.testing.assert_allclose(law.ln_shift([310.0, 330.0, 350.0]) / math.log(10.0), [3.0, 0.5, -2.0], rtol=1e-15)


def test_points_on_a_straight_line_stay_a_straight_line_within_and_beyond():
    T = np.array([300.0, 307.0, 330.0, 331.0, 360.0])
    law = Table(T=T, log10_a=-0.1 * (T - 330.0), T_ref=330.0)
    ask = np.linspace(280.0, 400.0, 77)
    np.testing.assert_allclose(law.ln_shift(ask) / math.log(10.0), -0.1 * (ask - 330.0), rtol=1e-13, atol=1e-14)


def test_two_points_make_a_straight_line():
    law = Table(T=[300.0, 310.0], log10_a=[1.0, 0.0], T_ref=310.0)
    np.testing.assert_allclose(law.ln_shift([290.0, 305.0, 320.0]) / math.log(10.0), [2.0, 0.5, -1.0], rtol=1e-14)


def test_it_is_used_as_it_stands_even_where_it_is_not_zero_at_the_reference():
    law = Table(T=[300.0, 310.0], log10_a=[1.0, 0.5], T_ref=300.0)
    assert law.ln_shift(300.0) == pytest.approx(math.log(10.0), rel=1e-15)


@settings(max_examples=150, deadline=None)
@given(
    steps=st.lists(st.floats(0.1, 30.0), min_size=1, max_size=12),
    values=st.lists(st.floats(-8.0, 8.0), min_size=13, max_size=13),
)
def test_between_two_points_it_never_leaves_their_values_nor_turns(steps, values):
    T = 250.0 + np.cumsum([0.0, *steps])
    log10_a = np.array(values[: T.size])
    law = Table(T=T, log10_a=log10_a, T_ref=300.0)
    for i in range(T.size - 1):
        inside = law.ln_shift(np.linspace(T[i], T[i + 1], 40)) / math.log(10.0)
        rises = np.diff(inside) * np.sign(log10_a[i + 1] - log10_a[i])
        assert rises.min() >= -1e-13  # monotone to the rounding of values up to 8


@settings(max_examples=50, deadline=None)
@given(values=st.lists(st.floats(-8.0, 8.0), min_size=5, max_size=5))
def test_slope_is_continuous_at_every_point(values):
    T = np.array([300.0, 304.0, 315.0, 317.0, 330.0])
    law = Table(T=T, log10_a=values, T_ref=300.0)
    h = 1e-5
    left = (law.ln_shift(T) - law.ln_shift(T - h)) / h
    right = (law.ln_shift(T + h) - law.ln_shift(T)) / h
    # second derivatives stay below 100 a K^2 for these steps of 2 K and more; differences round to 1e-9
    np.testing.assert_allclose(left, right, atol=5e-3)


def test_a_smooth_law_is_met_to_third_order_where_the_limiter_is_idle():
    def largest_error(n: int) -> float:
        T = np.linspace(300.0, 360.0, n)
        law = Table(T=T, log10_a=20.0 * np.exp(-(T - 300.0) / 40.0), T_ref=300.0)
        ask = np.linspace(300.0, 360.0, 3001)
        return np.abs(law.ln_shift(ask) / math.log(10.0) - 20.0 * np.exp(-(ask - 300.0) / 40.0)).max()

    orders = [math.log2(largest_error(n) / largest_error(2 * n - 1)) for n in (17, 33)]
    assert min(orders) > 2.9  # slopes by a parabola are second order at the ends: third order in the value


@pytest.mark.parametrize(
    ("T", "log10_a", "name"),
    [
        ([300.0], [1.0], "T"),
        ([300.0, -2.0], [1.0, 0.0], "T"),
        ([300.0, math.nan], [1.0, 0.0], "T"),
        ([300.0, 310.0, 300.0], [1.0, 0.0, 2.0], "T"),
        ([300.0, 310.0], [1.0], "log10_a"),
        ([300.0, 310.0], [1.0, math.inf], "log10_a"),
    ],
)
def test_points_that_are_not_admissible_are_named(T, log10_a, name):
    with pytest.raises(ParameterError) as caught:
        Table(T=T, log10_a=log10_a, T_ref=300.0)
    assert caught.value.name == name


def test_arrays_cannot_be_written_to():
    law = Table(T=[300.0, 310.0], log10_a=[1.0, 0.0], T_ref=310.0)
    for array in (law.T, law.log10_a, law.slope):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1.0
