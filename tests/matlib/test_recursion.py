import math

import mpmath
import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from matlib.errors import UnknownNameError
from matlib.recursion import RECURSIONS, find_recursion

ULP = float(np.finfo(np.float64).eps)
r_values = st.one_of(st.floats(0.0, 1e300), st.floats(-300.0, 300.0).map(lambda x: 10.0**x))


each_recursion = pytest.mark.parametrize("recursion", RECURSIONS.values(), ids=RECURSIONS.keys())


def at(function, r):
    """One value; every numpy error but underflow raised, as everywhere in this file."""
    with np.errstate(all="raise", under="ignore"):
        return float(function(np.array([r]))[0])


def test_the_four_recursions_are_found_by_their_names():
    assert list(RECURSIONS) == ["exponential", "midpoint", "trapezoidal", "backward-euler"]
    assert all(
        find_recursion(name) is recursion is RECURSIONS[recursion.name] for name, recursion in RECURSIONS.items()
    )


def test_an_unknown_recursion_is_refused_and_the_known_ones_are_listed():
    with pytest.raises(UnknownNameError) as caught:
        find_recursion("euler")
    assert caught.value.known == tuple(RECURSIONS)
    assert str(caught.value).startswith("unknown recursion 'euler': use one of exponential, midpoint")


@each_recursion
def test_an_increment_without_time_changes_nothing_and_takes_the_strain_in_full(recursion):
    assert at(recursion.decay, 0.0) == 1.0
    assert at(recursion.gain, 0.0) == 1.0


@each_recursion
def test_decay_starts_with_slope_minus_one(recursion):
    # one-sided difference: (decay(r) - 1)/r + 1 is r/2 or r, rounding ULP/r; r = 1e-8 leaves both below 1e-7
    assert (at(recursion.decay, 1e-8) - 1.0) / 1e-8 == pytest.approx(-1.0, abs=1e-7)


@each_recursion
@given(r=r_values)
@example(r=1e300)
@example(r=5e-324)
def test_decay_never_exceeds_one_in_size_and_gain_lies_between_zero_and_one(recursion, r):
    assert abs(at(recursion.decay, r)) <= 1.0
    assert 0.0 <= at(recursion.gain, r) <= 1.0


def exact(name, r):
    """Decay and gain from the formulas in the text books, in 40 digits."""
    r = mpmath.mpf(r)
    match name:
        case "exponential":
            return mpmath.exp(-r), -mpmath.expm1(-r) / r
        case "midpoint":
            return mpmath.exp(-r), mpmath.exp(-r / 2)
        case "trapezoidal":
            return (1 - r / 2) / (1 + r / 2), 1 / (1 + r / 2)
        case "backward-euler":
            return 1 / (1 + r), 1 / (1 + r)
    raise AssertionError(name)


@each_recursion
@given(r=st.floats(-300.0, 300.0).map(lambda x: 10.0**x))
@example(r=1e-300)
@example(r=1e300)
@example(r=2.0)
@example(r=1e-16)
def test_decay_and_gain_are_accurate_from_1e_minus_300_to_1e300(recursion, r):
    with mpmath.workdps(40):
        decay, gain = exact(recursion.name, r)
        # a function good to an ulp, an argument exact, and up to three operations of half an ulp each: 4 ulp;
        # the trapezoidal decay crosses zero at r = 2, where only an absolute error has a bound
        assert abs(at(recursion.gain, r) - gain) <= 4 * ULP * gain + 1e-320
        scale = 1 if recursion.name == "trapezoidal" else decay
        assert abs(at(recursion.decay, r) - decay) <= 4 * ULP * scale + 1e-320


@pytest.mark.parametrize(
    ("name", "decay", "gain_times_r"),
    [("exponential", 0.0, 1.0), ("midpoint", 0.0, 0.0), ("trapezoidal", -1.0, 2.0), ("backward-euler", 0.0, 1.0)],
)
def test_a_very_long_increment_runs_into_the_limit_that_is_stated(name, decay, gain_times_r):
    recursion, r = RECURSIONS[name], 1e300
    assert at(recursion.decay, r) == pytest.approx(decay, abs=1e-299)
    assert at(recursion.gain, r) * r == pytest.approx(gain_times_r, rel=4 * ULP, abs=1e-299)


@each_recursion
def test_arrays_of_any_shape_come_back_in_that_shape(recursion):
    r = np.array([[0.0, 1e-300, 1.0], [2.0, 50.0, 1e300]])
    assert recursion.decay(r).shape == recursion.gain(r).shape == (2, 3)
    assert recursion.gain(r)[1, 0] == at(recursion.gain, 2.0)
    assert recursion.gain(np.empty((0, 4))).shape == (0, 4)


@pytest.mark.parametrize("name", sorted(RECURSIONS))
def test_each_recursion_converges_at_its_order(name):
    # dh/dx + h = d(sin x)/dx, h(0) = 0, from 0 to 3, has h = (cos x + sin x - exp(-x))/2.
    recursion, end = RECURSIONS[name], 3.0
    closed = 0.5 * (math.cos(end) + math.sin(end) - math.exp(-end))
    errors = []
    for count in (200, 400):
        strain = np.sin(np.linspace(0.0, end, count + 1))
        decay, gain = at(recursion.decay, end / count), at(recursion.gain, end / count)
        h = 0.0
        for step in np.diff(strain):
            h = decay * h + gain * step
        errors.append(abs(h - closed))
    assert math.log2(errors[0] / errors[1]) == pytest.approx(recursion.order, abs=0.1)


@given(r=st.floats(1e-3, 50.0))
def test_exponential_is_exact_for_a_constant_strain_rate_however_it_is_cut(r):
    recursion = RECURSIONS["exponential"]
    whole = at(recursion.gain, r)
    half = at(recursion.gain, 0.5 * r)
    in_two = at(recursion.decay, 0.5 * r) * half * 0.5 + half * 0.5
    assert in_two == pytest.approx(whole, rel=1e-14)  # a dozen roundings
