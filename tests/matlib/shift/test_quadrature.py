import itertools
import math

import numpy as np
import pytest

from matlib.errors import ParameterError
from matlib.shift.quadrature import mean_rate_by_quadrature


def test_a_constant_rate_is_its_own_mean():
    mean = mean_rate_by_quadrature(lambda T: np.full(T.shape, 2.0), (), [300.0, 310.0], [300.0, 400.0])
    np.testing.assert_allclose(mean, math.exp(-2.0), rtol=1e-15)


@pytest.mark.parametrize("slope", [1e-9, 0.1, 10.0, 1e3, 1e5, 1e7])
def test_an_exponential_rate_is_met_however_steep(slope):
    # mean of exp(-s (400 - T)) over 100 K: (1 - exp(-100 s)) / (100 s); T near 400 rounds to 3e-14 K
    mean = mean_rate_by_quadrature(lambda T: slope * (400.0 - T), (), 300.0, 400.0)
    np.testing.assert_allclose(mean, -math.expm1(-100.0 * slope) / (100.0 * slope), rtol=1e-14 + 3e-14 * slope)


def test_a_peak_at_a_knot_is_not_missed():
    # fastest at 350 K, by exp(-|T - 350| * 1e4): mean over 100 K is 2 / 1e4 / 100
    mean = mean_rate_by_quadrature(lambda T: 1e4 * np.abs(T - 350.0), (350.0,), 300.0, 400.0)
    np.testing.assert_allclose(mean, 2e-6, rtol=1e-9)


def test_a_peak_as_narrow_as_the_rounding_of_temperatures_allows_ends_soon():
    asked = 0

    def ln_shift(T):
        nonlocal asked
        asked += T.size
        return 7e18 * ((T - 350.0) / 50.0) ** 2  # ln a_T jumps by 1e-5 from one double to the next at the peak

    mean = mean_rate_by_quadrature(ln_shift, (350.0,), 350.0, 351.0)
    # mean of exp(-(x/w)^2) over 1 K, w = 50/sqrt(7e18) K; T is rounded to 3e-14 K, a millionth of w
    np.testing.assert_allclose(mean, 0.5 * math.sqrt(math.pi) * 50.0 / math.sqrt(7e18), rtol=1e-5)
    assert asked < 10_000


def test_ramps_are_split_at_the_knots_inside_them_only():
    knots = (310.0, 320.0, 330.0)
    starts = np.array([300.0, 310.0, 312.0, 325.0, 340.0, 330.0, 320.0])
    ends = np.array([340.0, 320.0, 318.0, 315.0, 350.0, 330.0, 300.0])
    mean = mean_rate_by_quadrature(lambda T: np.interp(T, knots, [0.0, 3.0, 1.0]), knots, starts, ends)

    def exact(low, high):
        if low == high:
            return math.exp(-np.interp(low, knots, [0.0, 3.0, 1.0]))
        total = 0.0
        cuts = sorted({low, high, *(k for k in knots if low < k < high)})
        for a, b in itertools.pairwise(cuts):
            ya, yb = np.interp([a, b], knots, [0.0, 3.0, 1.0])
            total += (b - a) * (math.exp(-ya) if ya == yb else (math.exp(-ya) - math.exp(-yb)) / (yb - ya))
        return total / (high - low)

    np.testing.assert_allclose(mean, [exact(*sorted(r)) for r in zip(starts, ends, strict=True)], rtol=1e-14)


def test_nothing_overflows_or_underflows_on_the_way():
    mean = mean_rate_by_quadrature(lambda T: 680.0 * np.cos(T), (math.pi, 2 * math.pi), 3.0, 6.5)
    assert 0.0 < mean < math.exp(680.0)
    assert mean_rate_by_quadrature(lambda T: 1e5 + T, (), 1.0, 2.0) == 0.0


def test_a_rate_that_overflows_is_refused():
    with pytest.raises(ParameterError, match=">= -690"):
        mean_rate_by_quadrature(lambda T: -7.0 * T, (), [1.0, 90.0], [2.0, 100.0])


def test_shapes_broadcast():
    mean = mean_rate_by_quadrature(np.log, (), np.ones((2, 1)), np.full((1, 3), 2.0))
    np.testing.assert_allclose(mean, np.full((2, 3), math.log(2.0)), rtol=1e-15)
