from fractions import Fraction

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from matlib.errors import ParameterError
from matlib.interconversion import creep_of, relaxation_of, secular_roots
from matlib.prony import CreepSeries, PronySeries

LIQUID = 0.0


@st.composite
def spectra(draw, equilibrium=None):
    """A series with times at least 2 % apart, over up to 24 decades, and terms up to 14 decades apart."""
    steps = draw(st.lists(st.floats(0.01, 4.0), min_size=1, max_size=10))
    times = 10.0 ** np.minimum(np.cumsum(steps) - 12.0, 12.0 + 0.01 * np.arange(len(steps)))
    moduli = [10.0**x for x in draw(st.lists(st.floats(-5.0, 9.0), min_size=len(steps), max_size=len(steps)))]
    end = draw(st.one_of(st.just(LIQUID), st.floats(-5.0, 9.0).map(lambda x: 10.0**x)))
    return PronySeries(equilibrium=end if equilibrium is None else equilibrium, moduli=moduli, times=times)


def sixty_terms(equilibrium, weakest, seed=1):
    """60 terms over 24 decades; every third one is `weakest` times its neighbours."""
    moduli = 10.0 ** np.random.default_rng(seed).uniform(5.0, 9.0, 60)
    moduli[::3] *= weakest
    return PronySeries(equilibrium=equilibrium, moduli=moduli, times=np.logspace(-12.0, 12.0, 60))


SIXTY = [
    pytest.param(equilibrium, weakest, id=f"equilibrium {equilibrium:g}, weakest {weakest:g}")
    for equilibrium in (LIQUID, 1e-3, 1e6)
    for weakest in (1.0, 1e-14, 1e-25)
]


def carson_product(series, creep, exponent):
    """``M(s) D(s)`` at ``s = 10**exponent``, exact for the two series as they stand."""
    with mpmath.workdps(50):
        s = mpmath.mpf(10) ** exponent
        M = series.equilibrium + mpmath.fsum(
            m * s * t / (1 + s * t) for m, t in zip(series.moduli.tolist(), series.times.tolist(), strict=True)
        )
        D = creep.instantaneous_compliance + mpmath.fsum(
            d / (1 + s * t) for d, t in zip(creep.compliances.tolist(), creep.times.tolist(), strict=True)
        )
        return float(M * (D + creep.fluidity / s))


@given(series=spectra(), exponent=st.floats(-14.0, 14.0))
def test_relaxation_and_creep_are_reciprocal_in_carson_transform(series, exponent):
    # each side is a sum of positive numbers known to some ten roundings
    assert carson_product(series, creep_of(series), exponent) == pytest.approx(1.0, abs=1e-14)


@pytest.mark.parametrize(("equilibrium", "weakest"), SIXTY)
def test_sixty_terms_over_24_decades_are_reciprocal_in_carson_transform(equilibrium, weakest):
    series = sixty_terms(equilibrium, weakest)
    creep = creep_of(series)
    errors = [abs(carson_product(series, creep, exponent) - 1.0) for exponent in np.linspace(-14.0, 14.0, 29)]
    assert max(errors) < 1e-14  # sums of positive numbers, as above; measured 4e-16


@given(series=spectra())
def test_retardation_times_interlace_with_relaxation_times(series):
    roots = secular_roots(series.times, series.moduli * series.times, series.equilibrium)
    exact = [Fraction(b) + Fraction(d) for b, d in zip(roots.base.tolist(), roots.offset.tolist(), strict=True)]
    times = [Fraction(t) for t in series.times.tolist()]
    assert len(exact) == len(times) - (series.equilibrium == LIQUID)
    for root, below in zip(exact, times, strict=False):
        assert below < root
    for root, above in zip(exact, times[1:], strict=False):
        assert root < above


@given(series=spectra())
def test_creep_of_a_series_keeps_the_limits_of_its_modulus(series):
    creep = creep_of(series)
    assert creep.instantaneous_compliance == pytest.approx(1.0 / series.instantaneous, rel=1e-15)
    if series.equilibrium > 0.0:
        # a sum of positive numbers, each of a root and a residue known to some ten roundings
        assert creep.long_term_compliance == pytest.approx(1.0 / series.equilibrium, rel=1e-14)
        assert creep.fluidity == 0.0
    else:
        assert creep.fluidity == pytest.approx(1.0 / series.viscosity, rel=1e-15)
        # steady-state recoverable compliance of a liquid, sum(G tau^2)/(sum(G tau))^2 (Ferry, ch. 3; from memory)
        steady = float(np.sum(series.moduli * series.times**2)) / series.viscosity**2
        assert creep.instantaneous_compliance + creep.compliances.sum() == pytest.approx(steady, rel=1e-14)


@given(series=spectra())
def test_there_and_back_gives_the_same_series(series):
    back = relaxation_of(creep_of(series))
    # a retardation time rounded to a float moves its distance from a pole 2 % away by 50 roundings, and others after it
    np.testing.assert_allclose(back.times, series.times, rtol=1e-13)
    np.testing.assert_allclose(back.moduli, series.moduli, rtol=1e-11)
    assert back.equilibrium == pytest.approx(series.equilibrium, rel=1e-14)


@given(series=spectra())
def test_creep_there_and_back_gives_the_same_creep(series):
    creep = CreepSeries(
        instantaneous_compliance=1e-3, compliances=series.moduli, times=series.times, fluidity=series.equilibrium
    )
    relaxation = relaxation_of(creep)
    back = creep_of(relaxation)
    assert relaxation.times.size == series.times.size + (creep.fluidity > 0.0)
    np.testing.assert_allclose(back.times, creep.times, rtol=1e-13)  # as above
    np.testing.assert_allclose(back.compliances, creep.compliances, rtol=1e-11)
    assert back.fluidity == pytest.approx(creep.fluidity, rel=1e-13)


@pytest.mark.parametrize(("equilibrium", "weakest"), SIXTY)
def test_sixty_terms_over_24_decades_come_back_with_their_weak_terms(equilibrium, weakest):
    series = sixty_terms(equilibrium, weakest)
    creep = creep_of(series)
    assert creep.times.size == 60 - (equilibrium == LIQUID)
    back = relaxation_of(creep)
    np.testing.assert_allclose(back.times, series.times, rtol=1e-14)
    np.testing.assert_allclose(back.moduli, series.moduli, rtol=1e-11)  # see above


@pytest.mark.parametrize(("equilibrium", "weakest"), SIXTY)
def test_roots_and_residues_of_sixty_terms_agree_with_many_digit_arithmetic(equilibrium, weakest):
    series = sixty_terms(equilibrium, weakest)
    weights = series.moduli * series.times
    roots = secular_roots(series.times, weights, series.equilibrium)
    creep = creep_of(series)
    with mpmath.workdps(80):
        poles, u = [[mpmath.mpf(x) for x in array.tolist()] for array in (series.times, weights)]
        for base, offset, compliance in zip(
            roots.base.tolist(), roots.offset.tolist(), creep.compliances.tolist(), strict=True
        ):
            shifted = [p - mpmath.mpf(base) for p in poles]
            exact = mpmath.mpf(offset)
            for _ in range(4):  # Newton, from 15 digits to well over 50
                h = equilibrium + mpmath.fsum(w / (p - exact) for w, p in zip(u, shifted, strict=True))
                slope = mpmath.fsum(w / (p - exact) ** 2 for w, p in zip(u, shifted, strict=True))
                exact -= h / slope
            # the root of weights that are a few roundings off; measured 2e-15
            assert float(offset / exact) == pytest.approx(1.0, abs=2e-14)
            assert float(compliance * (base + exact) * slope) == pytest.approx(1.0, abs=4e-14)


def test_a_term_of_1e_minus_18_keeps_its_compliance_where_its_root_rounds_to_its_pole():
    weak = PronySeries(equilibrium=1.0, moduli=[1.0, 1e-18, 1.0], times=[1.0, 10.0, 100.0])
    creep = creep_of(weak)
    # first order in the weak term: the strong ones give R = 1 + 1/(1 - 10) + 1/(1 - 0.1) = 2 at its pole,
    # and 1/(R + m/(1 - x/p)) has the residue that belongs to D = m/R^2
    assert creep.times[1] == 10.0
    assert creep.compliances[1] == pytest.approx(0.25e-18, rel=1e-14)


@pytest.mark.parametrize("weak", [1e-6, 1e-12, 1e-18, 1e-24])
def test_a_weak_term_at_a_root_of_the_others_splits_one_compliance_in_two(weak):
    # 1 + 2/(1 - x/5) has its root at x = 15: the weak term sits on it
    series = PronySeries(equilibrium=1.0, moduli=[2.0, weak], times=[5.0, 15.0])
    creep = creep_of(series)
    assert creep.times.size == 2
    for exponent in (-3.0, -1.5, -1.0, 0.0, 2.0):
        assert carson_product(series, creep, exponent) == pytest.approx(1.0, abs=1e-14)
    # the two share D = 1/M_inf - 1/M_0 of the strong term, half each, to first order in their distance, which is about
    # sqrt(weak); a rounding of the strong term tilts the balance by its ratio to that distance
    distance = np.sqrt(weak)
    assert creep.compliances.tolist() == pytest.approx([1.0 / 3.0] * 2, rel=2.0 * distance + 4e-16 / distance)


def test_terms_of_equal_time_are_one_term():
    split = PronySeries(equilibrium=1.0, moduli=[0.5, 1.5], times=[5.0, 5.0])
    creep = creep_of(split)
    assert creep.times.tolist() == pytest.approx([15.0], rel=1e-15)
    assert creep.compliances.tolist() == pytest.approx([2.0 / 3.0], rel=1e-15)


@pytest.mark.parametrize("roundings", [5, 8, 50])
def test_times_a_few_roundings_apart_still_give_the_right_creep(roundings):
    times = [1.0, 1.0 + roundings * np.finfo(float).eps, 30.0]
    series = PronySeries(equilibrium=0.5, moduli=[1.0, 2.0, 1.0], times=times)
    for exponent in (-3.0, -1.0, 0.0, 1.0, 3.0):
        assert carson_product(series, creep_of(series), exponent) == pytest.approx(1.0, abs=1e-14)


def test_a_long_term_modulus_too_small_to_be_reached_is_refused():
    with pytest.raises(ParameterError, match=r"long-term part.*zero, or reached within 1e\+300 s \(got 1e-300\)"):
        creep_of(PronySeries(equilibrium=1e-300, moduli=[1e9], times=[1.0]))


def test_moduli_and_times_of_any_size_are_interconverted():
    series = PronySeries(equilibrium=1.0, moduli=[2.0, 3.0], times=[1.0, 20.0])
    extreme = series.scaled(1e140).slowed(1e-160)
    creep, plain = creep_of(extreme), creep_of(series)
    np.testing.assert_allclose(creep.times, plain.times * 1e-160, rtol=4e-15)
    np.testing.assert_allclose(creep.compliances, plain.compliances * 1e-140, rtol=4e-15)


def test_an_elastic_modulus_and_its_compliance_are_reciprocal():
    creep = creep_of(PronySeries.elastic(4.0))
    assert (creep.instantaneous_compliance, creep.times.size, creep.fluidity) == (0.25, 0, 0.0)
    assert relaxation_of(creep).equilibrium == 4.0


def test_one_maxwell_element_creeps_as_spring_and_dashpot():
    creep = creep_of(PronySeries(equilibrium=0.0, moduli=[2.0], times=[3.0]))
    assert (creep.instantaneous_compliance, creep.times.size) == (0.5, 0)
    assert creep.fluidity == pytest.approx(1.0 / 6.0, rel=1e-15)
    back = relaxation_of(creep)
    assert (back.equilibrium, back.moduli.tolist()) == (0.0, [2.0])
    assert back.times.tolist() == pytest.approx([3.0], rel=1e-15)


@given(modulus=st.floats(1e-3, 1e12), ratio=st.floats(1e-12, 1e12), tau=st.floats(1e-12, 1e12))
def test_the_standard_linear_solid_has_its_closed_form(modulus, ratio, tau):
    creep = creep_of(PronySeries(equilibrium=modulus, moduli=[modulus * ratio], times=[tau]))
    # rho = tau M_0/M_inf and D_1 = 1/M_inf - 1/M_0 (textbook; Ferry, Tschoegl)
    assert creep.times[0] == pytest.approx(tau * (1.0 + ratio), rel=1e-14)
    assert creep.compliances[0] == pytest.approx(ratio / (modulus * (1.0 + ratio)), rel=1e-14)
