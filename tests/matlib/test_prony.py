import math

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from matlib.errors import ParameterError
from matlib.prony import CreepSeries, PronySeries

SOLID = PronySeries(equilibrium=1.0, moduli=[3.0, 2.0], times=[50.0, 5.0])
CREEP = CreepSeries(instantaneous_compliance=1.0, compliances=[3.0, 2.0], times=[50.0, 5.0], fluidity=0.25)
TERMS = st.lists(st.tuples(st.floats(1e-3, 1e9), st.floats(1e-9, 1e9)), min_size=1, max_size=8)


def series_of(equilibrium, terms):
    return PronySeries(equilibrium=equilibrium, moduli=[m for m, _ in terms], times=[t for _, t in terms])


def test_terms_are_stored_by_ascending_time_and_cannot_be_written():
    assert SOLID.times.tolist() == [5.0, 50.0]
    assert SOLID.moduli.tolist() == [2.0, 3.0]
    assert CREEP.compliances.tolist() == [2.0, 3.0]
    for array in (SOLID.times, SOLID.moduli, SOLID.fractions, CREEP.times, CREEP.compliances):
        assert not array.flags.writeable


def test_terms_of_equal_time_keep_their_order_until_they_are_merged():
    series = PronySeries(equilibrium=0.0, moduli=[1.0, 2.0, 4.0], times=[7.0, 7.0, 1.0])
    assert series.moduli.tolist() == [4.0, 1.0, 2.0]
    assert series.merged().moduli.tolist() == [4.0, 3.0]
    assert series.merged().times.tolist() == [1.0, 7.0]


@pytest.mark.parametrize(("roundings", "left"), [(1, 1), (4, 1), (5, 2), (100, 2)])
def test_times_are_equal_within_four_roundings(roundings, left):
    times = [1.0, 1.0 + roundings * np.finfo(float).eps]
    assert PronySeries(equilibrium=0.0, moduli=[1.0, 1.0], times=times).merged().times.size == left
    creep = CreepSeries(instantaneous_compliance=1.0, compliances=[1.0, 1.0], times=times)
    assert creep.merged().times.size == left


@pytest.mark.parametrize(
    ("changes", "name", "expected"),
    [
        ({"equilibrium": -1.0}, "equilibrium", ">= 0 Pa"),
        ({"equilibrium": math.nan}, "equilibrium", "a finite number Pa"),
        ({"moduli": [1.0, 0.0]}, "moduli[1]", "finite and > 0 Pa"),
        ({"moduli": [math.inf, 1.0]}, "moduli[0]", "finite and > 0 Pa"),
        ({"times": [1.0, -3.0]}, "times[1]", "finite and > 0 s"),
        ({"times": [math.nan, 1.0]}, "times[0]", "finite and > 0 s"),
        ({"times": [1.0]}, "times", "as many as `moduli` (2)"),
        ({"moduli": [[1.0, 2.0]]}, "moduli", "one-dimensional"),
        ({"equilibrium": 0.0, "moduli": [], "times": []}, "instantaneous modulus", "finite and > 0 Pa"),
    ],
)
def test_a_wrong_relaxation_value_is_named_in_the_error(changes, name, expected):
    good = {"equilibrium": 1.0, "moduli": [1.0, 2.0], "times": [1.0, 2.0]}
    with pytest.raises(ParameterError) as caught:
        PronySeries(**(good | changes))
    assert (caught.value.name, caught.value.expected) == (name, expected)


@pytest.mark.parametrize(
    ("changes", "name"),
    [
        ({"instantaneous_compliance": 0.0}, "instantaneous_compliance"),
        ({"fluidity": -1.0}, "fluidity"),
        ({"compliances": [-1.0]}, "compliances[0]"),
        ({"times": [0.0]}, "times[0]"),
        ({"times": [1.0, 2.0]}, "times"),
    ],
)
def test_a_wrong_creep_value_is_named_in_the_error(changes, name):
    good = {"instantaneous_compliance": 1.0, "compliances": [1.0], "times": [1.0]}
    with pytest.raises(ParameterError) as caught:
        CreepSeries(**(good | changes))
    assert caught.value.name == name


def test_fractions_of_the_instantaneous_modulus_go_in_and_come_out():
    series = PronySeries.from_fractions(200.0, [0.25, 0.5], [1.0, 10.0])
    assert (series.instantaneous, series.equilibrium) == (200.0, 50.0)
    assert series.fractions.tolist() == [0.25, 0.5]


@pytest.mark.parametrize("count", [1, 3, 7, 10, 49])
def test_fractions_that_sum_to_one_but_for_rounding_make_a_liquid(count):
    liquid = PronySeries.from_fractions(3.0e9, [1.0 / count] * count, np.arange(1.0, count + 1.0))
    assert liquid.equilibrium == 0.0


def test_a_tiny_rest_of_the_fractions_stays_a_solid():
    assert PronySeries.from_fractions(1.0, [1.0 - 1e-12], [1.0]).equilibrium > 0.0


def test_fractions_above_one_are_refused_with_the_likely_remedy():
    with pytest.raises(ParameterError, match=r"sum of fractions.*at most 1.*from_long_term"):
        PronySeries.from_fractions(1.0, [0.7, 0.4], [1.0, 2.0])


def test_fractions_are_called_fractions_in_errors():
    with pytest.raises(ParameterError, match=r"`fractions\[1\]` must be finite and > 0 \(got -0.1\)"):
        PronySeries.from_fractions(1.0, [0.7, -0.1], [1.0, 2.0])
    with pytest.raises(ParameterError, match="`equilibrium` must be finite and > 0 Pa"):
        PronySeries.from_long_term(0.0, [0.7], [1.0])


def test_fractions_of_the_long_term_modulus_may_exceed_one():
    series = PronySeries.from_long_term(2.0, [3.0, 0.5], [1.0, 2.0])
    assert (series.equilibrium, series.instantaneous) == (2.0, 9.0)
    assert series.moduli.tolist() == [6.0, 1.0]


def test_an_elastic_series_answers_with_its_modulus_everywhere():
    elastic = PronySeries.elastic(7.0)
    assert elastic.instantaneous == elastic.equilibrium == 7.0
    assert elastic.relaxation([0.0, 1.0, 1e300]).tolist() == [7.0, 7.0, 7.0]
    assert elastic.storage([0.0, 1e300]).tolist() == [7.0, 7.0]
    assert elastic.loss([0.0, 1e300]).tolist() == [0.0, 0.0]


@given(terms=TERMS, equilibrium=st.floats(0.0, 1e9), xi=st.floats(0.0, 1e10))
def test_relaxation_agrees_with_many_digit_arithmetic(terms, equilibrium, xi):
    series = series_of(equilibrium, terms)
    with mpmath.workdps(40):
        exact = mpmath.mpf(equilibrium) + sum(m * mpmath.exp(-mpmath.mpf(xi) / t) for m, t in terms)
    # exp(-r) of a rounded r is off by r roundings where it still weighs: r exp(-r) < 1 of the term
    assert float(series.relaxation(xi)) == pytest.approx(float(exact), rel=1e-14, abs=1e-15 * series.instantaneous)


@given(terms=TERMS, equilibrium=st.floats(0.0, 1e9), exponent=st.floats(-300.0, 300.0))
def test_storage_and_loss_agree_with_many_digit_arithmetic_at_any_frequency(terms, equilibrium, exponent):
    omega = 10.0**exponent
    series = series_of(equilibrium, terms)
    with mpmath.workdps(40):
        s = mpmath.mpc(0, omega)
        exact = mpmath.mpf(equilibrium) + sum(m * s * t / (1 + s * t) for m, t in terms)
    # every sum is of positive numbers, so the error is a few roundings; below 1e-290 the numbers themselves underflow
    assert float(series.storage(omega)) == pytest.approx(float(exact.real), rel=1e-14, abs=1e-290)
    assert float(series.loss(omega)) == pytest.approx(float(exact.imag), rel=1e-14, abs=1e-290)


def test_arrays_keep_their_shape():
    grid = np.logspace(-3.0, 3.0, 6).reshape(2, 3)
    for method in (SOLID.relaxation, SOLID.storage, SOLID.loss, CREEP.creep):
        assert method(grid).shape == (2, 3)
        assert method(1.0).shape == ()
        assert method([]).shape == (0,)


@pytest.mark.parametrize("bad", [-1.0, math.nan])
def test_a_negative_time_or_frequency_is_refused(bad):
    for method, name in (
        (SOLID.relaxation, "xi"),
        (CREEP.creep, "xi"),
        (SOLID.storage, "omega"),
        (SOLID.loss, "omega"),
    ):
        with pytest.raises(ParameterError) as caught:
            method([0.0, bad])
        assert caught.value.name == name


def test_the_longest_times_reach_the_long_term_modulus_without_a_warning():
    series = PronySeries(equilibrium=1.0, moduli=[1.0, 1.0], times=[1e-20, 1e20])
    assert series.relaxation([1e300, math.inf]).tolist() == [1.0, 1.0]


def test_only_a_liquid_has_a_viscosity():
    liquid = PronySeries(equilibrium=0.0, moduli=[3.0, 2.0], times=[10.0, 1.0])
    assert liquid.viscosity == 32.0
    assert SOLID.viscosity is None


def test_scaling_and_slowing_change_moduli_and_times_alone():
    assert SOLID.scaled(2.0).relaxation(3.0) == 2.0 * SOLID.relaxation(3.0)
    assert SOLID.slowed(4.0).relaxation(12.0) == SOLID.relaxation(3.0)
    assert CREEP.scaled(2.0).creep(3.0) == 2.0 * CREEP.creep(3.0)
    for call in (SOLID.scaled, SOLID.slowed, CREEP.scaled):
        with pytest.raises(ParameterError, match="factor"):
            call(0.0)


@given(a=TERMS, b=TERMS, xi=st.floats(0.0, 1e10))
def test_the_sum_of_two_series_relaxes_and_creeps_as_both_together(a, b, xi):
    one, other = series_of(1.0, a), series_of(2.0, b)
    # times that merge differ by four roundings, which moves a modulus by at most two (r exp(-r) < 0.4)
    expected = one.relaxation(xi) + other.relaxation(xi)
    scale = one.instantaneous + other.instantaneous
    assert float(one.plus(other).relaxation(xi)) == pytest.approx(float(expected), rel=1e-14, abs=1e-14 * scale)
    first, second = (
        CreepSeries(instantaneous_compliance=1.0, compliances=s.moduli, times=s.times, fluidity=0.5)
        for s in (one, other)
    )
    both = float(first.creep(xi) + second.creep(xi))
    assert float(first.plus(second).creep(xi)) == pytest.approx(both, rel=1e-14)


def test_creep_is_its_closed_form():
    expected = 1.0 + 2.0 * (1.0 - math.exp(-2.0)) + 3.0 * (1.0 - math.exp(-0.2)) + 0.25 * 10.0
    assert float(CREEP.creep(10.0)) == pytest.approx(expected, rel=1e-15)


def test_creep_keeps_full_precision_at_very_short_times():
    creep = CreepSeries(instantaneous_compliance=1e-30, compliances=[1.0], times=[1.0])
    assert float(creep.creep(1e-20)) == pytest.approx(1e-20, rel=1e-9)  # 1e-30 of the glass, then nothing but 1e-20


def test_only_a_solid_has_a_long_term_compliance():
    solid = CreepSeries(instantaneous_compliance=1.0, compliances=[3.0, 2.0], times=[50.0, 5.0])
    assert solid.long_term_compliance == 6.0
    assert float(solid.creep(math.inf)) == 6.0
    assert CREEP.long_term_compliance is None
