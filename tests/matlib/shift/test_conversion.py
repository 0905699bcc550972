import math
from dataclasses import dataclass

import numpy as np
import pytest
import scipy.optimize
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.errors import ConversionError, ParameterError, PoleError
from matlib.shift import (
    VFT,
    WLF,
    Arrhenius,
    Crossover,
    MeasuredRange,
    NoShift,
    Polynomial,
    ShiftLaw,
    Table,
)
from matlib.shift.conversion import convert_law

LN10 = math.log(10.0)
WLF_LAW = WLF(C1=14.2, C2=61.0, T_ref=353.15)
RANGE = (335.0, 420.0)


def errors(law, result, T):
    """log10 a_T of the new law, the time factor allowed for, less that of the old one."""
    return (math.log(result.time_factor) + result.law.ln_shift(T) - law.ln_shift(T)) / LN10


def alternations(e, level):
    """How often the error changes between +level and -level, within 1e-4 of it, as T rises."""
    signs = np.sign(e[np.abs(e) >= level * (1.0 - 1e-4)])
    return 1 + int(np.count_nonzero(np.diff(signs)))


# exact ---------------------------------------------------------------------------------------------------------------


@settings(max_examples=100, deadline=None)
@given(
    C1=st.floats(1.0, 30.0),
    C2=st.floats(25.0, 150.0),
    base=st.sampled_from([10, "e"]),
    to=st.sampled_from(["wlf", "vft"]),
    T_ref=st.none() | st.floats(340.0, 450.0),
)
def test_wlf_and_vft_are_exact_about_any_reference(C1, C2, base, to, T_ref):
    law = WLF(C1=C1, C2=C2, T_ref=353.15)
    result = convert_law(law, to, T_ref=T_ref, base=base)
    T = np.linspace(335.0, 460.0, 40)
    assert result.exact
    assert (result.largest_error_decades, result.error_at, result.fitted_range) == (0.0, None, None)
    old, new = law.ln_shift(T), math.log(result.time_factor) + result.law.ln_shift(T)
    # promised: 1e-12 where |ln a_T| is of order one, 1e-13 relative beyond (of the factor, too, where it is the larger)
    largest = np.maximum(np.abs(old), abs(math.log(result.time_factor)))
    assert np.all(np.abs(new - old) <= np.maximum(1e-12, 1e-13 * largest))


@settings(max_examples=60, deadline=None)
@given(C1=st.floats(1.0, 30.0), C2=st.floats(25.0, 150.0), there=st.floats(340.0, 450.0))
def test_a_round_trip_by_vft_about_another_reference_changes_no_constant(C1, C2, there):
    vft = convert_law(WLF(C1=C1, C2=C2, T_ref=353.15), "vft", T_ref=there)
    back = convert_law(vft.law, "wlf", T_ref=353.15)
    assert (pytest.approx(C1, rel=1e-12), pytest.approx(C2, rel=1e-12)) == (back.law.C1, back.law.C2)
    assert vft.time_factor * back.time_factor == pytest.approx(1.0, rel=1e-12)


def test_a_law_in_its_own_form_and_reference_is_untouched():
    for law in (
        WLF(C1=14.2, C2=61.0, T_ref=353.15, base="e"),
        VFT(B=1900.3, T_inf=290.1, T_ref=353.15),
        Arrhenius(activation_energy=123456.7, T_ref=353.15, gas_constant=8.31),
    ):
        result = convert_law(law, law.name)
        assert repr(result.law) == repr(law)
        assert result.time_factor == 1.0


def test_a_new_base_changes_C1_alone():
    result = convert_law(WLF_LAW, "wlf", base="e")
    assert (result.law.C2, result.law.T_ref, result.law.base) == (61.0, 353.15, "e")
    assert pytest.approx(14.2 * LN10, rel=1e-15) == result.law.C1


def test_arrhenius_is_exactly_wlf_and_comes_back():
    law = Arrhenius(activation_energy=1e5, T_ref=298.15)
    wlf = convert_law(law, "wlf")
    assert wlf.exact
    assert wlf.law.C2 == 298.15
    back = convert_law(wlf.law, "arrhenius")
    assert back.exact
    assert back.law.activation_energy == pytest.approx(1e5, rel=1e-14)


@pytest.mark.parametrize(("T_inf", "exact"), [(0.0, True), (9e-11, True), (-9e-11, True), (2e-10, False), (1.0, False)])
def test_to_arrhenius_is_exact_only_where_the_pole_is_at_absolute_zero(T_inf, exact):
    law = VFT(B=12000.0, T_inf=T_inf, T_ref=300.0)
    result = convert_law(law, "arrhenius", T_range=(250.0, 350.0))
    assert result.exact is exact
    if exact:
        T = np.linspace(250.0, 350.0, 21)
        np.testing.assert_allclose(result.law.ln_shift(T), law.ln_shift(T), rtol=1e-12)


def test_a_stated_gas_constant_stays_unless_another_is_asked_for():
    law = Arrhenius(activation_energy=1e5, T_ref=300.0, gas_constant=8.3)
    assert convert_law(law, "arrhenius", T_ref=310.0).law.gas_constant == 8.3
    other = convert_law(law, "arrhenius", gas_constant=8.4).law
    assert other.gas_constant == 8.4
    assert pytest.approx(law.B, rel=1e-15) == other.B


def test_a_moved_reference_alone_is_exact_for_every_law(law):
    result = convert_law(law, law.name, T_ref=340.0)
    T = np.linspace(303.0, 449.0, 31)
    assert result.exact
    assert type(result.law) is type(law)
    assert result.law.T_ref == 340.0
    np.testing.assert_allclose(errors(law, result, T), 0.0, atol=1e-12)


# fitted --------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("T_ref", [None, 370.0])
def test_the_arrhenius_fit_is_the_best_and_its_error_equioscillates(T_ref):
    result = convert_law(WLF_LAW, "arrhenius", T_ref=T_ref, T_range=RANGE)
    T = np.linspace(*RANGE, 20001)
    e = errors(WLF_LAW, result, T)
    assert not result.exact
    assert result.largest_error_decades == pytest.approx(np.abs(e).max(), rel=1e-6)  # of a grid of 4 mK
    # one constant: the largest error occurs twice, opposite after the sign of the fitted function at the reference
    signed = e * np.sign(T - result.law.T_ref)
    assert signed.max() == pytest.approx(-signed.min(), rel=1e-4)

    target = WLF_LAW.ln_shift(T) - WLF_LAW.ln_shift(result.law.T_ref)

    def worst(energy):
        law = Arrhenius(activation_energy=energy, T_ref=result.law.T_ref)
        return np.abs(law.ln_shift(T) - target).max() / LN10

    best = scipy.optimize.minimize_scalar(worst, bounds=(1e4, 3e6), method="bounded", options={"xatol": 1e-3})
    assert result.largest_error_decades == pytest.approx(best.fun, rel=1e-5)  # grids of 4000 and 20 001 points


CROSSOVER = Crossover(below=Arrhenius(activation_energy=4e5, T_ref=360.0), above=WLF_LAW, at=350.0)
FITTED = {
    "polynomial": Polynomial(coefficients=[-0.1, 4e-4], T_ref=373.0),
    "table": Table(T=[335.0, 350.0, 380.0, 420.0], log10_a=[4.0, 2.4, 0.0, -1.0], T_ref=380.0),
}


@pytest.mark.parametrize("source", FITTED.values(), ids=FITTED.keys())
@pytest.mark.parametrize("to", ["wlf", "vft"])
def test_the_two_constant_fit_is_as_good_as_a_global_search_finds(source, to):
    result = convert_law(source, to, T_range=RANGE, fit="minimax")
    T = np.unique(np.append(np.linspace(*RANGE, 2001), source.knots)).clip(*RANGE)
    target = source.ln_shift(T)

    def worst(x):
        B, T_inf = math.exp(x[0]), RANGE[0] - math.exp(x[1])
        return np.abs(B / (T - T_inf) - B / (source.T_ref - T_inf) - target).max() / LN10

    search = scipy.optimize.differential_evolution(worst, [(5.0, 12.0), (0.0, 8.0)], seed=1, tol=1e-10, maxiter=300)
    polished = scipy.optimize.minimize(worst, search.x, method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-12})
    assert result.largest_error_decades <= polished.fun * (1.0 + 1e-4)
    # nor better than possible on the grid of the search
    assert np.abs(errors(source, result, T)).max() >= polished.fun * (1.0 - 1e-4)


def test_the_two_constant_fit_of_a_smooth_law_equioscillates():
    source = FITTED["polynomial"]
    result = convert_law(source, "wlf", T_range=RANGE)
    T = np.linspace(*RANGE, 200001)
    e = errors(source, result, T) * np.sign(T - source.T_ref)
    # two constants: three alternations, counted with the sign that the fitted functions have about the reference
    assert alternations(e, result.largest_error_decades) == 3


@pytest.mark.parametrize("to", ["wlf", "vft", "arrhenius"])
def test_a_fit_keeps_the_shift_factor_at_the_reference(to):
    result = convert_law(FITTED["table"], to, T_ref=360.0, T_range=RANGE)
    assert result.law.ln_shift(360.0) == 0.0
    assert result.law.T_ref == 360.0
    assert result.fitted_range == RANGE


def test_wlf_fitted_to_a_fine_table_of_wlf_finds_its_constants():
    T = np.linspace(330.0, 430.0, 401)
    table = Table(T=T, log10_a=WLF_LAW.ln_shift(T) / LN10, T_ref=353.15)
    result = convert_law(table, "wlf", T_range=(330.0, 430.0), fit="minimax")
    # interpolation between points 0.25 K apart errs by about 1e-5 decades
    assert result.largest_error_decades < 1e-4
    assert pytest.approx(14.2, rel=1e-4) == result.law.C1
    assert pytest.approx(61.0, rel=1e-4) == result.law.C2
    assert result.note == ""


def test_a_law_that_is_straight_in_temperature_says_that_the_search_ended():
    result = convert_law(Polynomial(coefficients=[-0.1], T_ref=373.0), "vft", T_range=RANGE)
    assert "-10000 K" in result.note
    assert result.law.T_inf == pytest.approx(-1e4, rel=1e-9)


def test_a_law_that_does_not_fall_with_temperature_is_refused():
    rising = Polynomial(coefficients=[0.1], T_ref=373.0)
    for law in (rising, NoShift()):
        for to in ("wlf", "vft", "arrhenius"):
            with pytest.raises(ConversionError, match="does not fall with temperature"):
                convert_law(law, to, T_range=RANGE)


# tables --------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("points", [None, 2, 7])
def test_a_table_samples_the_range_evenly_and_the_reference(points):
    result = convert_law(WLF_LAW, "table", T_range=RANGE, points=points)
    table = result.law
    even = np.linspace(*RANGE, points or 25)
    np.testing.assert_allclose(table.T, np.sort(np.append(even, 353.15)), rtol=1e-15)
    np.testing.assert_allclose(table.ln_shift(table.T), WLF_LAW.ln_shift(table.T), rtol=1e-14, atol=1e-14)
    assert table.ln_shift(353.15) == 0.0


def test_a_reference_among_the_samples_is_not_taken_twice():
    result = convert_law(WLF_LAW, "table", T_range=(343.15, 363.15), points=3)
    np.testing.assert_allclose(result.law.T, [343.15, 353.15, 363.15])


def test_the_error_of_a_table_is_the_largest_between_its_points():
    result = convert_law(WLF_LAW, "table", T_ref=380.0, T_range=RANGE, points=9)
    T = np.linspace(*RANGE, 100001)
    e = np.abs(errors(WLF_LAW, result, T))
    assert not result.exact
    assert result.largest_error_decades == pytest.approx(e.max(), rel=1e-6)  # of a grid of 1 mK
    assert result.error_at == pytest.approx(T[e.argmax()], abs=0.05)
    assert 0.0 < result.largest_error_decades < 0.1


def test_a_table_is_moved_exactly_and_resampled_when_points_are_asked_for():
    table = FITTED["table"]
    assert convert_law(table, "table", T_ref=350.0).exact
    again = convert_law(table, "table", T_range=RANGE, points=50)
    assert not again.exact
    assert again.law.T.size == 51


def test_every_law_can_be_sampled(law):
    result = convert_law(law, "table", T_range=(335.0, 420.0), points=200)
    T = np.linspace(335.0, 420.0, 3001)
    e = np.abs(errors(law, result, T)).max()
    assert e <= result.largest_error_decades * (1.0 + 1e-9) + 1e-13
    assert e < 0.05  # kinks fall between points 0.4 K apart, where slopes reach 0.3 decades/K


# measured ranges -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("outside", ["extrapolate", "refuse", "hold"])
def test_a_measured_range_is_put_around_the_new_law(outside):
    law = MeasuredRange(law=WLF_LAW, low=340.0, high=400.0, outside=outside)
    result = convert_law(law, "vft", T_ref=360.0)
    assert isinstance(result.law, MeasuredRange)
    assert isinstance(result.law.law, VFT)
    assert (result.law.low, result.law.high, result.law.outside) == (340.0, 400.0, outside)
    np.testing.assert_allclose(errors(law, result, np.linspace(340.0, 400.0, 13)), 0.0, atol=1e-13)


def test_the_measured_range_is_what_a_fit_is_made_for_unless_another_is_given():
    law = MeasuredRange(law=WLF_LAW, low=340.0, high=400.0)
    assert convert_law(law, "arrhenius").fitted_range == (340.0, 400.0)
    assert convert_law(law, "arrhenius", T_range=(320.0, 410.0)).fitted_range == (320.0, 410.0)


@pytest.mark.parametrize("outside", ["refuse", "hold"])
def test_where_nothing_beyond_it_is_used_only_the_measured_part_is_fitted(outside):
    law = MeasuredRange(law=WLF_LAW, low=340.0, high=400.0, outside=outside)
    assert convert_law(law, "arrhenius", T_range=(320.0, 390.0)).fitted_range == (340.0, 390.0)
    with pytest.raises(ConversionError, match="no part in common"):
        convert_law(law, "arrhenius", T_range=(300.0, 330.0))


# refusals ------------------------------------------------------------------------------------------------------------


def test_a_fit_without_a_range_is_refused_with_the_remedy():
    with pytest.raises(ConversionError, match="not exact: give the temperature range"):
        convert_law(WLF_LAW, "arrhenius")
    with pytest.raises(ConversionError, match="shift law wlf as table"):
        convert_law(WLF_LAW, "table")


@pytest.mark.parametrize("to", ["crossover", "polynomial", "none", "nonsense"])
def test_a_target_that_is_none_names_the_possible_ones(to):
    with pytest.raises(ConversionError, match="use one of wlf, vft, arrhenius, table"):
        convert_law(WLF_LAW, to, T_range=RANGE)


def test_a_pole_inside_the_range_is_named():
    with pytest.raises(PoleError) as caught:
        convert_law(WLF_LAW, "arrhenius", T_range=(280.0, 400.0))
    assert caught.value.limit == WLF_LAW.pole


@pytest.mark.parametrize("T_range", [(400.0, 300.0), (300.0, 300.0), (-5.0, 300.0), (300.0, math.nan)])
def test_a_range_that_is_none_is_refused(T_range):
    with pytest.raises(ParameterError, match="T_range"):
        convert_law(FITTED["polynomial"], "wlf", T_range=T_range)


def test_less_than_two_points_are_refused():
    with pytest.raises(ParameterError, match="`points` must be >= 2"):
        convert_law(WLF_LAW, "table", T_range=RANGE, points=1)


@dataclass(frozen=True)
class Linear(ShiftLaw):
    """A law that the package does not know."""

    name = "linear"
    T_ref = 373.0

    def ln_shift(self, T):
        return -0.2 * (np.asarray(T, dtype=float) - 373.0)


def test_a_law_of_unknown_form_can_be_sampled_and_fitted_but_not_moved():
    assert convert_law(Linear(), "table", T_range=RANGE).largest_error_decades < 1e-12
    assert convert_law(Linear(), "arrhenius", T_range=RANGE).law.activation_energy > 0.0
    with pytest.raises(ConversionError, match="cannot be moved"):
        convert_law(Linear(), "linear", T_ref=350.0)
