import math

import numpy as np
import pytest

from matlib.errors import ParameterError, PoleError, UnknownNameError
from matlib.shift import SHIFT_RULES, VFT, WLF, NoShift, Polynomial, find_shift_rule

LAW = WLF(C1=14.2, C2=61.0, T_ref=353.15)
RULES = list(SHIFT_RULES)
ORDERS = {"start": 1, "end": 1, "middle": 2, "mean-rate": 2, "mean-log": 2}


def reduced_time_of_ramp(rule, increments, law=LAW, low=350.0, high=370.0, duration=100.0):
    T = np.linspace(low, high, increments + 1)
    return float(np.sum(SHIFT_RULES[rule](law, duration / increments, T[:-1], T[1:])))


def test_the_rules_are_the_six_of_the_contract():
    assert RULES == ["start", "end", "middle", "mean-rate", "mean-log", "integrated"]


@pytest.mark.parametrize("rule", ORDERS)
def test_a_ramp_converges_at_the_order_of_its_rule(rule):
    exact = 100.0 * float(LAW.mean_rate(350.0, 370.0))
    errors = [abs(reduced_time_of_ramp(rule, n) / exact - 1.0) for n in (64, 128, 256)]
    orders = [math.log2(errors[i] / errors[i + 1]) for i in range(2)]
    assert orders == pytest.approx([ORDERS[rule]] * 2, abs=0.1)


def test_the_integrated_rule_is_exact_with_one_increment():
    # sum of 256 closed forms: rounding only
    assert reduced_time_of_ramp("integrated", 1) == pytest.approx(reduced_time_of_ramp("integrated", 256), rel=1e-14)


@pytest.mark.parametrize("rule", RULES)
def test_an_isothermal_increment_is_exact_by_every_rule(rule):
    T = np.linspace(300.0, 400.0, 21)
    np.testing.assert_allclose(SHIFT_RULES[rule](LAW, 3.0, T, T), 3.0 * np.exp(-LAW.ln_shift(T)), rtol=1e-15)


@pytest.mark.parametrize("rule", RULES)
def test_no_duration_passes_exactly_no_reduced_time(rule):
    dxi = SHIFT_RULES[rule](LAW, 0.0, np.array([300.0, 400.0]), np.array([400.0, 300.0]))
    np.testing.assert_array_equal(dxi, [0.0, 0.0])


@pytest.mark.parametrize("rule", RULES)
def test_arguments_broadcast_and_scalars_stay_scalar(rule):
    f = SHIFT_RULES[rule]
    assert f(LAW, np.ones((4, 1)), 350.0, np.full(3, 360.0)).shape == (4, 3)
    assert f(LAW, 1.0, np.full(3, 350.0), 360.0).shape == (3,)
    assert f(LAW, 1.0, 350.0, np.full(3, 360.0)).shape == (3,)
    assert np.shape(f(LAW, 1.0, 350.0, 360.0)) == ()
    assert f(LAW, [], 350.0, 360.0).shape == (0,)


@pytest.mark.parametrize("rule", ["middle", "mean-rate", "mean-log", "integrated"])
def test_symmetric_rules_do_not_see_the_direction(rule):
    T = np.linspace(300.0, 420.0, 13)
    np.testing.assert_array_equal(SHIFT_RULES[rule](LAW, 1.0, T, T[::-1]), SHIFT_RULES[rule](LAW, 1.0, T[::-1], T))


@pytest.mark.parametrize("rule", RULES)
def test_reduced_time_lies_between_that_of_the_slower_and_of_the_faster_end(rule):
    T = np.linspace(300.0, 420.0, 25)
    a, b = np.meshgrid(T, T)
    slow, fast = np.exp(-LAW.ln_shift(np.minimum(a, b))), np.exp(-LAW.ln_shift(np.maximum(a, b)))
    dxi = SHIFT_RULES[rule](LAW, 1.0, a, b)
    assert np.all(dxi >= slow * (1.0 - 1e-14))
    assert np.all(dxi <= fast * (1.0 + 1e-14))


@pytest.mark.parametrize("rule", RULES)
def test_a_quench_onto_the_pole_underflows_without_nan(rule):
    dxi = SHIFT_RULES[rule](LAW, 1e30, np.array([400.0, 292.150001]), np.array([292.150001, 292.16]))
    assert np.all(np.isfinite(dxi))
    assert dxi[1] == 0.0


def test_mean_log_is_the_logarithmic_mean_of_the_rates():
    p, q = np.exp(-LAW.ln_shift([350.0, 360.0]))
    expected = (q - p) / math.log(q / p)
    assert float(SHIFT_RULES["mean-log"](LAW, 1.0, 350.0, 360.0)) == pytest.approx(expected, rel=1e-14)


def test_mean_log_does_not_cancel_where_the_ends_nearly_agree():
    # second order in the drop: half the drop below the faster rate
    p, q = np.exp(-LAW.ln_shift([353.15, 353.15 + 1e-9]))
    got = float(SHIFT_RULES["mean-log"](LAW, 1.0, 353.15, 353.15 + 1e-9))
    assert got == pytest.approx(0.5 * (p + q), rel=3e-16)


def test_mean_log_is_exact_where_ln_a_is_linear_in_temperature():
    law = Polynomial(coefficients=[-0.1], T_ref=300.0)
    T = np.linspace(280.0, 330.0, 11)
    exact = SHIFT_RULES["integrated"](law, 2.0, 300.0, T)
    np.testing.assert_allclose(SHIFT_RULES["mean-log"](law, 2.0, 300.0, T), exact, rtol=2e-14)


@pytest.mark.parametrize("rule", RULES)
def test_durations_up_to_1e30_s_are_answered(rule):
    assert float(SHIFT_RULES[rule](NoShift(), 1e30, 300.0, 310.0)) == pytest.approx(1e30, rel=1e-15)


@pytest.mark.parametrize("rule", RULES)
@pytest.mark.parametrize("dt", [-1.0, math.nan, math.inf])
def test_durations_that_are_none_are_refused(rule, dt):
    with pytest.raises(ParameterError, match=r"`dt` must be finite and >= 0 s") as caught:
        SHIFT_RULES[rule](LAW, [1.0, dt], 350.0, 360.0)
    assert caught.value.found == pytest.approx(dt, nan_ok=True)


@pytest.mark.parametrize("rule", RULES)
def test_a_reduced_time_that_no_double_holds_is_refused(rule):
    law = VFT(B=1e5, T_inf=100.0, T_ref=200.0)
    with pytest.raises(ParameterError, match=r"`dt` must be short enough .*1/a_T goes up to"):
        SHIFT_RULES[rule](law, 1e30, 420.0, 420.0)  # ln a_T = -687.5, a duration of e^69


@pytest.mark.parametrize("rule", RULES)
def test_an_increment_below_the_pole_is_refused(rule):
    with pytest.raises(PoleError):
        SHIFT_RULES[rule](LAW, 1.0, 280.0, 281.0)


def test_an_unknown_rule_lists_the_known_ones():
    assert find_shift_rule("middle") is SHIFT_RULES["middle"]
    with pytest.raises(UnknownNameError, match="unknown shift rule 'centre': use one of start, end, middle"):
        find_shift_rule("centre")
