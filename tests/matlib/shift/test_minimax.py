import numpy as np
import pytest
import scipy.optimize
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.shift.minimax import LOWEST_POLE, best_amplitude, best_pole, family_function


@settings(max_examples=150, deadline=None)
@given(
    y=st.lists(st.floats(-10.0, 10.0), min_size=8, max_size=8),
    phi=st.lists(st.floats(0.1, 2.0) | st.floats(-2.0, -0.1), min_size=8, max_size=8),
)
def test_the_amplitude_is_that_of_the_linear_programme(y, phi):
    y, phi = np.array(y), np.array(phi)
    rows = np.concatenate((np.stack((-phi, -np.ones(8)), axis=1), np.stack((phi, -np.ones(8)), axis=1)))
    programme = scipy.optimize.linprog([0.0, 1.0], A_ub=rows, b_ub=np.concatenate((-y, y)), bounds=[(None, None)] * 2)
    _, error = best_amplitude(y, phi)
    assert error == pytest.approx(programme.fun, abs=1e-7)  # the tolerance of the programme's solver


@settings(max_examples=100, deadline=None)
@given(y=st.lists(st.floats(-10.0, 10.0), min_size=8, max_size=8))
def test_at_the_best_amplitude_the_largest_errors_are_equal_and_opposite(y):
    y, phi = np.array(y), np.linspace(-1.0, 2.0, 8)
    B, error = best_amplitude(y, phi)
    residual = (y - B * phi) * np.sign(phi)
    assert residual.max() == pytest.approx(error, abs=1e-13)
    assert residual.min() == pytest.approx(-error, abs=1e-13)


def test_a_multiple_is_met_exactly():
    phi = np.array([-1.0, 0.0, 0.5, 3.0])
    assert best_amplitude(2.5 * phi, phi) == (2.5, 0.0)


def test_the_function_of_the_family_does_not_cancel_next_to_the_reference():
    got = family_function(np.array([350.0 + 1e-9]), 300.0, 350.0)
    # (350 + 1e-9) - 350 as doubles
    assert got[0] == pytest.approx(-((350.0 + 1e-9) - 350.0) / 2500.0, rel=1e-10)


@pytest.mark.parametrize("T_inf", [299.0, 250.0, 0.0, -2000.0])
def test_the_pole_of_a_member_of_the_family_is_found_again(T_inf):
    T = np.linspace(300.0, 400.0, 401)
    y = 1e3 * family_function(T, T_inf, 350.0)
    found = best_pole((T, y), (T, y), 350.0)
    # the error falls to rounding, 1e-14 of y, where u is known to about 1e-9 (far poles: 1e-7, y barely depends on it)
    assert 350.0 - found == pytest.approx(350.0 - T_inf, rel=1e-6)


def test_a_straight_line_drives_the_pole_to_its_limit():
    T = np.linspace(300.0, 400.0, 401)
    y = -0.3 * (T - 350.0)
    assert best_pole((T, y), (T, y), 350.0) == pytest.approx(LOWEST_POLE, rel=1e-9)
