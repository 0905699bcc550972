import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.shift.offset_ramp import mean_rate_below, scaled_exponential_integral

# a few roundings of the parts, one digit lost to the difference at the most
TOLERANCE = 3e-15


def exactly(cold: float, hot: float, B: float) -> float:
    """The mean by mpmath's exponential integral, with digits to spare for a difference of 1e-12 of the parts."""
    with mp.workdps(60):
        cold, hot, B = mp.mpf(cold), mp.mpf(hot), mp.mpf(B)
        g_hot, g_cold = (mp.exp(B / u) * mp.expint(2, B / u) for u in (hot, cold))
        return float((hot * g_hot - cold * mp.exp(B / hot - B / cold) * g_cold) / (hot - cold))


def test_the_scaled_exponential_integral_agrees_with_mpmath_on_every_piece():
    z = np.concatenate((np.geomspace(1e-12, 1e5, 700), *(np.nextafter(c, [0.0, 100.0]) for c in (1.0, 4.0, 25.0))))
    with mp.workdps(40):
        expected = [float(mp.exp(mp.mpf(x)) * mp.expint(2, mp.mpf(x))) for x in z]
    np.testing.assert_allclose(scaled_exponential_integral(z), expected, rtol=TOLERANCE)


def test_the_scaled_exponential_integral_has_its_limits():
    np.testing.assert_array_equal(scaled_exponential_integral(np.array([0.0, 1e300, np.inf])), [1.0, 1e-300, 0.0])


@settings(max_examples=300, deadline=None)
@given(
    hot=st.floats(-4.0, 6.0).map(lambda p: 10.0**p),
    part=st.floats(-12.0, -1e-6).map(lambda p: 10.0**p),
    z=st.floats(-8.0, 5.0).map(lambda p: 10.0**p),
)
def test_the_mean_agrees_with_mpmath_from_tiny_ramps_to_huge_ones(hot, part, z):
    cold, B = hot * (1.0 - part), z * hot
    got = float(mean_rate_below(np.array(cold), np.array(hot), B))
    expected = exactly(cold, hot, B)
    assert got == pytest.approx(expected, rel=TOLERANCE, abs=1e-300)


@pytest.mark.parametrize("z", [1e-3, 0.9, 3.9, 7.0, 7.9, 8.1, 30.0])
@pytest.mark.parametrize("part", [0.2, 0.2499, 0.2501, 0.3])
def test_the_two_ways_of_evaluation_meet(z, part):
    cold, hot = 80.0 * (1.0 - part), 80.0
    got = float(mean_rate_below(np.array(cold), np.array(hot), z * hot))
    assert got == pytest.approx(exactly(cold, hot, z * hot), rel=TOLERANCE)


def test_no_ramp_gives_exactly_one_and_a_quench_underflows():
    u = np.array([1e-9, 1.0, 1e6])
    np.testing.assert_array_equal(mean_rate_below(u, u, 5e3), [1.0, 1.0, 1.0])
    # from next to the pole: the cold end adds nothing
    cold = mean_rate_below(np.array(1e-300), np.array(50.0), 5e3)
    assert float(cold) == pytest.approx(float(scaled_exponential_integral(np.array(100.0))), rel=1e-15)
    assert mean_rate_below(np.array(1.0), np.array(2.0), 1e300) == pytest.approx(2.0 / 1e300, rel=1e-12)
