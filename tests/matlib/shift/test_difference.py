import math

import numpy as np
import pytest

from matlib.errors import ParameterError, PoleError
from matlib.shift import WLF, NoShift, Polynomial, Table, largest_difference_decades
from matlib.shift.difference import chebyshev_temperatures


def test_a_law_does_not_differ_from_itself():
    law = WLF(C1=14.2, C2=61.0, T_ref=353.15)
    assert largest_difference_decades(law, law, 300.0, 400.0)[0] == 0.0


def test_a_peak_inside_the_range_is_found_to_rounding():
    # 0.1 x - 0.1 x^3/300 has its peaks at x = +-10, of 2/3
    bump = Polynomial(coefficients=[0.1, 0.0, -0.1 / 300.0], T_ref=350.0)
    decades, at = largest_difference_decades(NoShift(), bump, 350.0, 365.0)
    assert decades == pytest.approx(2.0 / 3.0, rel=1e-14)
    assert at == pytest.approx(360.0, abs=1e-5)  # a peak is flat: the square root of rounding


def test_a_sharp_peak_at_a_knot_is_found():
    spike = Table(T=[300.0, 349.99, 350.0, 350.01, 400.0], log10_a=[0.0, 0.0, 3.0, 0.0, 0.0], T_ref=300.0)
    assert largest_difference_decades(spike, NoShift(), 300.0, 400.0) == (pytest.approx(3.0, rel=1e-15), 350.0)


def test_the_ends_belong_to_the_range_and_a_single_temperature_is_one():
    line = Polynomial(coefficients=[-0.1], T_ref=300.0)
    assert largest_difference_decades(line, NoShift(), 290.0, 305.0) == (pytest.approx(1.0, rel=1e-14), 290.0)
    assert largest_difference_decades(line, NoShift(), 305.0, 305.0) == (pytest.approx(0.5, rel=1e-14), 305.0)


def test_it_is_the_same_either_way_round():
    a, b = WLF(C1=14.2, C2=61.0, T_ref=353.15), WLF(C1=13.0, C2=60.0, T_ref=353.15)
    assert largest_difference_decades(a, b, 320.0, 400.0) == largest_difference_decades(b, a, 320.0, 400.0)


def test_a_range_that_is_none_or_that_meets_a_pole_is_refused():
    law = WLF(C1=14.2, C2=61.0, T_ref=353.15)
    with pytest.raises(ParameterError, match="`T_high` must be at or above T_low = 400 K"):
        largest_difference_decades(law, law, 400.0, 300.0)
    with pytest.raises(PoleError):
        largest_difference_decades(law, NoShift(), 280.0, 400.0)


def test_the_grid_has_both_ends_and_the_extra_points_inside():
    T = chebyshev_temperatures(300.0, 400.0, 11, (250.0, 333.0, 300.0, 450.0))
    assert T[0] == 300.0
    assert T[-1] == 400.0
    assert 333.0 in T
    assert T.size == 12
    assert np.all(np.diff(T) > 0.0)
    assert T[1] - T[0] == pytest.approx(50.0 * (1.0 - math.cos(math.pi / 10.0)), rel=1e-12)
