import math

import numpy as np
import pytest

from matlib.errors import ParameterError, ShiftRangeError
from matlib.shift import Polynomial


def test_knots_are_where_the_slope_changes_sign():
    # log10 a_T = -x (x - 30)(x + 30)/9e4 turns at x = +-30/sqrt(3)
    law = Polynomial(coefficients=[0.01, 0.0, -1.0 / 9e4], T_ref=300.0)
    np.testing.assert_allclose(law.knots, [300.0 - 30.0 / math.sqrt(3.0), 300.0 + 30.0 / math.sqrt(3.0)], rtol=1e-14)


@pytest.mark.parametrize("coefficients", [[-0.1], [-0.1, 0.0], [0.0], [-0.1, 0.0, -1e-5]])
def test_a_polynomial_that_never_turns_has_no_knots(coefficients):
    assert Polynomial(coefficients=coefficients, T_ref=300.0).knots == ()


def test_turning_points_below_absolute_zero_do_not_count():
    assert Polynomial(coefficients=[-0.1, -1e-4], T_ref=300.0).knots == ()  # turns at 300 - 500 K


def test_coefficients_are_a_copy_that_cannot_be_written_to():
    given = np.array([-0.1, 1e-4])
    law = Polynomial(coefficients=given, T_ref=300.0)
    given[0] = 5.0
    assert law.coefficients[0] == -0.1
    with pytest.raises(ValueError, match="read-only"):
        law.coefficients[0] = 1.0


def test_far_out_where_the_rate_overflows_it_is_refused():
    with pytest.raises(ShiftRangeError, match="overflows"):
        Polynomial(coefficients=[-0.1, -1e-2], T_ref=300.0).ln_shift([300.0, 1000.0])


@pytest.mark.parametrize("coefficients", [[], [[-0.1]], [math.nan], [-0.1, math.inf]])
def test_coefficients_that_are_none_are_refused(coefficients):
    with pytest.raises(ParameterError, match="`coefficients` must be one or more finite numbers"):
        Polynomial(coefficients=coefficients, T_ref=300.0)
    with pytest.raises(ParameterError, match="T_ref"):
        Polynomial(coefficients=[-0.1], T_ref=-300.0)
