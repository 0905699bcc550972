"""Brackets of the hereditary integral over temperature ramps, against nested quadrature in 30 digits."""

import math

import mpmath as mp
import numpy as np
import pytest

from drivers import hereditary
from drivers.hereditary import bracketed_gains
from matlib.shift import WLF, Arrhenius, ShiftLaw
from tests.exact.kernels import DIGITS
from tests.exact.laws import LAWS
from tests.exact.ramps import Ramp

WLF_LAW = LAWS["wlf"]
RAMPS = {
    "heating": (320.0, 375.0),
    "cooling": (375.0, 320.0),
    "over a knot": (344.0, 351.0),
    "a millikelvin": (352.0, 352.001),
    "a rounding": (352.0, math.nextafter(352.0, 400.0)),
}
TIMES = np.array([1e-6, 1e-2, 1.0, 300.0, 1e5])
TRUTH = 1e-15  # nested quadrature stops at 1e-17 of the ramp, a panel


def exactly(law: ShiftLaw, duration: float, T_start: float, T_end: float) -> Ramp:
    with mp.workdps(DIGITS):
        times = [mp.mpf(t) for t in TIMES.tolist()]
        return Ramp(law, mp.mpf(duration), mp.mpf(T_start), mp.mpf(T_end), times, flows=True)


def gains_of(law, duration, T_start, T_end, *, budget=1e-6, **more):
    return bracketed_gains(
        law,
        np.array([duration]),
        np.array([T_start, T_end]),
        TIMES,
        importance=np.ones((1, TIMES.size)),
        lag_importance=np.array([1e-3 / duration]) if duration > 0.0 else None,
        budget=budget,
        **more,
    )


@pytest.mark.parametrize("duration", [1e-4, 20.0, 1e7])
@pytest.mark.parametrize("ramp", RAMPS.values(), ids=RAMPS.keys())
@pytest.mark.parametrize("law", LAWS.values(), ids=LAWS.keys())
def test_half_widths_reach_the_exact_decay_gain_lag_and_clock(law, ramp, duration):
    gains, truth = gains_of(law, duration, *ramp), exactly(law, duration, *ramp)
    assert abs(gains.dxi[0] - truth.dxi) <= gains.dxi_rounding[0]
    assert abs(gains.lag[0] - truth.lag) <= gains.lag_gap[0] + gains.lag_rounding[0]
    for i in range(TIMES.size):
        assert abs(gains.decay[0, i] - truth.decay[i]) <= gains.decay_rounding[0, i] + 1e-300
        assert abs(gains.gain[0, i] - truth.gain[i]) <= gains.gain_gap[0, i] + gains.gain_rounding[0, i] + TRUTH


def test_the_exact_ramp_has_the_reduced_time_of_the_exponential_integral():
    truth = exactly(WLF_LAW, 20.0, 320.0, 375.0)
    with mp.workdps(DIGITS):
        B, T_inf = mp.log(10) * mp.mpf(14.2) * 61, mp.mpf(353.15) - 61

        def upto(T):
            u = T - T_inf
            return mp.exp(B / 61) * (u * mp.exp(-B / u) - B * mp.e1(B / u))

        closed = 20 * (upto(mp.mpf(375)) - upto(mp.mpf(320))) / 55
    assert abs(truth.dxi / closed - 1) < 1e-16


@pytest.mark.parametrize("law", LAWS.values(), ids=LAWS.keys())
def test_cutting_stops_where_the_budget_is_met_and_the_bracket_still_holds_the_truth(law):
    truth = exactly(law, 20.0, 320.0, 375.0)
    for budget in (1e-2, 1e-4, 1e-7):
        gains = gains_of(law, 20.0, 320.0, 375.0, budget=budget)
        assert gains.within_budget
        assert gains.ordered
        # a half-width is two thirds of the gap
        assert gains.gain_gap.sum() + 1e-3 / 20.0 * gains.lag_gap.sum() <= budget * (2.0 / 3.0) * (1.0 + 1e-12)
        errors = [abs(g - t) for g, t in zip(gains.gain[0], truth.gain, strict=True)]
        assert all(
            e <= w + r + TRUTH for e, w, r in zip(errors, gains.gain_gap[0], gains.gain_rounding[0], strict=True)
        )


def test_the_bracket_narrows_with_the_square_of_the_pieces():
    pieces, widths = [], []
    for budget in (1e-5, 1e-7, 1e-9):
        gains = gains_of(WLF_LAW, 20.0, 320.0, 375.0, budget=budget)
        pieces.append(gains.pieces.row.size)
        widths.append(float(gains.gain_gap.sum()))
    order = -math.log(widths[-1] / widths[0]) / math.log(pieces[-1] / pieces[0])
    assert order == pytest.approx(2.0, abs=0.2)  # cutting rounds up to whole parts


def test_cutting_on_from_earlier_pieces_gives_a_bracket_that_overlaps_the_one_from_scratch():
    coarse = gains_of(WLF_LAW, 20.0, 320.0, 375.0, budget=1e-2)
    on = gains_of(WLF_LAW, 20.0, 320.0, 375.0, budget=1e-6, pieces=coarse.pieces)
    new = gains_of(WLF_LAW, 20.0, 320.0, 375.0, budget=1e-6)
    assert on.within_budget
    assert on.pieces.row.size > coarse.pieces.row.size
    assert np.all(np.abs(on.gain - new.gain) <= on.gain_gap + new.gain_gap + on.gain_rounding + new.gain_rounding)


def test_too_much_work_ends_the_cutting_and_the_wide_bracket_still_holds_the_truth(monkeypatch):
    monkeypatch.setattr(hereditary, "LARGEST_WORK", 100)
    gains, truth = gains_of(WLF_LAW, 20.0, 320.0, 375.0, budget=1e-9), exactly(WLF_LAW, 20.0, 320.0, 375.0)
    assert not gains.within_budget
    assert gains.gain_gap.max() > 1e-9
    for i in range(TIMES.size):
        assert abs(gains.gain[0, i] - truth.gain[i]) <= gains.gain_gap[0, i] + gains.gain_rounding[0, i]


@pytest.mark.parametrize("law", LAWS.values(), ids=LAWS.keys())
def test_two_parts_of_a_ramp_make_up_the_whole(law):
    whole = gains_of(law, 20.0, 320.0, 375.0)
    parts = bracketed_gains(
        law,
        np.array([5.0, 15.0]),
        np.array([320.0, 333.75, 375.0]),
        TIMES,
        importance=np.ones((2, TIMES.size)),
        budget=1e-6,
    )
    decay, gain = parts.decay, parts.gain
    assert parts.dxi.sum() == pytest.approx(whole.dxi[0], rel=2e-13)  # roundings of the clock, two of them
    slack = parts.gain_gap.sum(axis=0) + parts.gain_rounding.sum(axis=0) + whole.gain_gap[0] + whole.gain_rounding[0]
    assert np.all(np.abs(0.25 * gain[0] * decay[1] + 0.75 * gain[1] - whole.gain[0]) <= slack)
    np.testing.assert_allclose(decay.prod(axis=0), whole.decay[0], rtol=1e-11, atol=1e-300)  # 1e-13 of up to r = 100


def test_a_jump_passes_no_time_and_passes_the_input_on_whole():
    gains = gains_of(WLF_LAW, 0.0, 320.0, 375.0)
    assert gains.dxi[0] == gains.dxi_rounding[0] == gains.lag[0] == gains.lag_gap[0] == 0.0
    assert np.all(gains.decay == 1.0)
    assert np.all(gains.gain == 1.0)
    assert np.all(gains.gain_gap == 0.0)


@pytest.mark.parametrize("law", LAWS.values(), ids=LAWS.keys())
def test_isothermal_increments_are_exact_but_for_rounding(law):
    gains = gains_of(law, 7.0, 340.0, 340.0)
    r = 7.0 * np.exp(-law.ln_shift(340.0)) / TIMES
    assert gains.pieces.row.size == 1
    assert np.all(gains.gain_gap == 0.0)
    assert gains.lag_gap[0] == 0.0
    np.testing.assert_allclose(gains.gain[0], -np.expm1(-r) / r, rtol=1e-14)  # a few eps
    np.testing.assert_allclose(gains.decay[0], np.exp(-r), rtol=1e-15 * (4.0 + 2.0 * min(r.max(), 745.0)), atol=1e-300)
    assert np.all(gains.gain_rounding[0] <= 1e-12 * gains.gain[0])


@pytest.mark.parametrize(
    "T", [(293.0, 293.0), (293.0, 420.0), (420.0, 293.0), (292.1500001, 292.2), (420.0, 292.15001)]
)
@pytest.mark.parametrize("duration", [1e-12, 1.0, 1e30])
def test_no_duration_and_no_distance_from_the_pole_overflows(duration, T):
    """Warnings are errors: nothing overflows, and nothing is not a number."""
    increments = WLF_LAW, np.array([duration, duration]), np.array([T[0], *T]), np.array([1e-12, 1.0, 1e12])
    uncut = bracketed_gains(*increments)
    lag_importance = 1.0 / np.maximum(uncut.dxi, 1e-300)
    gains = bracketed_gains(*increments, importance=np.ones((2, 3)), lag_importance=lag_importance, budget=1e-3)
    assert gains.within_budget
    for name in (
        "dxi",
        "dxi_rounding",
        "decay",
        "decay_rounding",
        "gain",
        "gain_gap",
        "gain_rounding",
        "lag",
        "lag_gap",
    ):
        values = getattr(gains, name)
        assert np.all(np.isfinite(values)), name
        assert np.all(values >= 0.0), name
    assert np.all(gains.gain <= 1.0)
    assert np.all(gains.decay <= 1.0)


def test_the_fastest_law_over_the_longest_time_leaves_the_gain_of_the_end_rate():
    law = Arrhenius(activation_energy=2e6, T_ref=330.0)  # 690 e-folds of rate, nearly as far as a double reaches
    gains = bracketed_gains(law, np.array([1e30]), np.array([330.0, 497.0]), np.array([1e-300, 1.0]))
    assert np.all(np.isfinite(gains.gain))
    assert np.all(gains.gain + gains.gain_gap >= 0.0)
    assert np.all(gains.decay == 0.0)


def test_roundings_near_the_pole_are_covered():
    """There ln a_T runs to hundreds, and the rate has no more digits than ln a_T has behind the point."""
    law = WLF(C1=17.44, C2=101.6, T_ref=381.6, base=10)
    largest = 0.0
    for height in np.geomspace(6.0, 20.0, 40).tolist():
        T = 280.0 + height
        gains, truth = gains_of(law, 1e9, T, T), exactly(law, 1e9, T, T)
        error = float(abs(gains.dxi[0] / truth.dxi - 1))
        assert error <= gains.dxi_rounding[0] / gains.dxi[0] <= 1e-10
        largest = max(largest, error)
    assert largest > 2e-14  # more than is lost where ln a_T is small


def test_a_half_width_reaches_the_chord_and_the_tangents():
    """One piece in closed form, with the rate at both ends and its mean."""
    law, T_start, T_end, duration = LAWS["arrhenius"], 330.0, 340.0, 3.0
    gains = bracketed_gains(law, np.array([duration]), np.array([T_start, T_end]), TIMES)
    first, last = duration * np.exp(-law.ln_shift([T_start, T_end]))
    dxi = duration * float(law.mean_rate(T_start, T_end))
    meet = (last - dxi) / (last - first)
    for i, tau in enumerate(TIMES.tolist()):
        chord = -math.expm1(-dxi / tau) * tau / dxi
        late, early = last * (1.0 - meet) / tau, first * meet / tau
        tangents = -math.expm1(-late) / (last / tau) - math.exp(-late) * math.expm1(-early) / (first / tau)
        reach = (gains.gain_gap[0, i] + gains.gain_rounding[0, i]) * (1.0 + 1e-9)
        assert abs(gains.gain[0, i] - chord) <= reach
        assert abs(gains.gain[0, i] - tangents) <= reach
        assert gains.gain_gap[0, i] < abs(chord - tangents) + 1e-15  # and no farther than need be


class Hidden(ShiftLaw):
    """A law that says nothing of its turning point."""

    __slots__ = ()
    name = "hidden"
    T_ref = 350.0

    def ln_shift(self, T):
        return -3.0 * np.sin((np.asarray(T, dtype=np.float64) - 340.0) * (math.pi / 20.0))


def test_a_law_that_is_not_monotone_where_it_says_so_is_noticed():
    gains = gains_of(Hidden(), 10.0, 340.0, 360.0)
    assert not gains.ordered


def test_many_ramps_at_once_are_each_as_on_their_own():
    T = np.array([320.0, 375.0, 375.0, 340.0, 352.0, 330.0])
    duration = np.array([20.0, 5.0, 0.0, 1e3, 1e-3])
    law = LAWS["table"]
    together = bracketed_gains(
        law, duration, T, TIMES, importance=np.ones((5, TIMES.size)), lag_importance=np.zeros(5), budget=1e-5
    )
    for k in range(5):
        truth = exactly(law, duration[k], T[k], T[k + 1])
        assert abs(together.dxi[k] - truth.dxi) <= together.dxi_rounding[k]
        for i in range(TIMES.size):
            slack = together.gain_gap[k, i] + together.gain_rounding[k, i] + TRUTH
            assert abs(together.gain[k, i] - truth.gain[i]) <= slack
