import numpy as np
import pytest

from matlib.errors import PoleError, ShiftRangeError
from matlib.shift.domain import check_ln_shift, check_temperatures


def test_good_temperatures_come_back_as_an_array():
    assert check_temperatures("x", [300, 310]).dtype == np.float64


def test_the_lowest_offender_is_named_and_a_pole_goes_before_absolute_zero():
    with pytest.raises(PoleError) as pole:
        check_temperatures("x", [300.0, 90.0, 80.0], pole=100.0)
    assert (pole.value.temperature, pole.value.limit) == (80.0, 100.0)
    with pytest.raises(ShiftRangeError, match="above absolute zero") as zero:
        check_temperatures("x", [300.0, -1.0], pole=-50.0)
    assert not isinstance(zero.value, PoleError)
    assert zero.value.temperature == -1.0


def test_values_that_are_not_numbers_are_named():
    with pytest.raises(ShiftRangeError, match="inf K"):
        check_temperatures("x", [300.0, np.inf])
    with pytest.raises(ShiftRangeError, match="nan K"):
        check_temperatures("x", [300.0, np.nan])


def test_shift_factors_are_capped_where_slow_and_refused_where_the_rate_overflows():
    T = np.array([300.0, 310.0])
    np.testing.assert_array_equal(check_ln_shift("x", T, np.array([np.inf, 2.0]), 300.0), [1e300, 2.0])
    np.testing.assert_array_equal(check_ln_shift("x", T, np.array([-690.0, 2.0]), 300.0), [-690.0, 2.0])
    with pytest.raises(ShiftRangeError, match=r"ln a_T = -691 there is below -690") as caught:
        check_ln_shift("x", T, np.array([1.0, -691.0]), 300.0)
    assert caught.value.temperature == 310.0
