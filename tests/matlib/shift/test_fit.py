import math

import numpy as np
import pytest
import scipy.optimize
import scipy.stats
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from matlib.errors import ConversionError, ParameterError, PoleError
from matlib.shift import VFT, WLF, Arrhenius, Table
from matlib.shift.akaike import akaike_weights, support
from matlib.shift.conversion import convert_law
from matlib.shift.fit import FORMS, fit_table
from matlib.shift.fit_statistics import corrected_criterion, student_quantile

LN10 = math.log(10.0)
R = 8.314462618
T_REF = 353.15
WLF_LAW = WLF(C1=14.2, C2=61.0, T_ref=T_REF)
ARRHENIUS_LAW = Arrhenius(activation_energy=120e3, T_ref=T_REF)
B, T_INF = LN10 * 14.2 * 61.0, T_REF - 61.0
OFF_REFERENCE = T_REF + np.linspace(-17.0, 61.0, 12)  # 353.15 K is none of them
WITH_REFERENCE = T_REF + np.linspace(-20.0, 60.0, 9)


def decades(law, T):
    return law.ln_shift(T) / LN10


def scattered(law, T, scatter, seed, anchor=None):
    """Values of a law with normal scatter; exactly 0 at the anchor."""
    y = decades(law, T) + scatter * np.random.default_rng(seed).normal(size=T.size)
    return y if anchor is None else np.where(T == anchor, 0.0, y)


def covariance(fit):
    return fit.correlation * np.outer(fit.standard_errors, fit.standard_errors)


# exact tables --------------------------------------------------------------------------------------------------------

TRUTH = {"wlf": (14.2, 61.0), "vft": (B, T_INF), "arrhenius": (120e3,)}


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("count", [3, 4, 5, 6, 20, 1000])
@pytest.mark.parametrize("anchored", [True, False])
def test_an_exact_table_gives_its_constants_back_and_no_residual(form, count, anchored):
    law = ARRHENIUS_LAW if form == "arrhenius" else WLF_LAW
    T = T_REF + np.linspace(-20.3, 60.0, count)
    T = np.unique(np.append(T[np.abs(T - T_REF) > 1.0], T_REF)) if anchored else T
    fit = fit_table(T, decades(law, T), T_REF, form)
    truth = TRUTH[form] if anchored else (*TRUTH[form], 0.0)
    # a table's values are rounded to 1e-15 decades, and C1 and C2 see up to a few hundred times as much
    np.testing.assert_allclose(fit.values, truth, rtol=1e-12, atol=1e-12)
    assert fit.anchored is anchored
    assert fit.points == T.size - anchored
    assert fit.degrees_of_freedom == fit.points - len(truth)
    assert abs(fit.largest_residual) < 1e-13
    if fit.degrees_of_freedom > 0:
        assert fit.residual_decades < 1e-13
        assert np.all(fit.standard_errors < 1e-11 * np.maximum(np.abs(truth), 1.0))
    else:
        assert fit.residual_decades is None
        assert np.isinf(fit.standard_errors).all()
    for number in (*fit.values, *fit.standard_errors, *fit.correlation.ravel(), fit.level, fit.pole_error):
        assert not math.isnan(number)
    assert fit.aicc is None or math.isfinite(fit.aicc)


def test_a_table_of_zero_residual_to_the_last_bit_gives_a_finite_criterion():
    assert math.isfinite(corrected_criterion(0.0, 6, 1, 5.0))
    assert math.isfinite(corrected_criterion(0.0, 6, 1, 0.0))


def test_the_corrected_criterion_is_the_textbook_formula():
    """``n ln(S/n) + 2k + 2k(k+1)/(n-k-1)`` with k = constants + 1 (Burnham and Anderson 2002, from memory)."""
    S, n, k = 0.37, 14, 4
    expected = n * math.log(S / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1)
    assert corrected_criterion(S, n, k - 1, 3.0) == pytest.approx(expected, rel=1e-14)
    assert corrected_criterion(S, k + 1, k - 1, 3.0) is None


def test_student_quantiles_are_those_of_scipy():
    for free in (1, 2, 7, 100):
        assert student_quantile(0.95, free) == pytest.approx(scipy.stats.t.ppf(0.975, free), rel=1e-10)
    assert math.isinf(student_quantile(0.95, 0))


# an independent engine -----------------------------------------------------------------------------------------------


def wlf_curve(T, C1, C2, level=0.0):
    return level - C1 * (T - T_REF) / (C2 + T - T_REF)


def vft_curve(T, B, T_inf, level=0.0):
    return level + (B / (T - T_inf) - B / (T_REF - T_inf)) / LN10


def arrhenius_curve(T, energy, level=0.0):
    return level + energy / R * (1.0 / T - 1.0 / T_REF) / LN10


CURVES = {"wlf": wlf_curve, "vft": vft_curve, "arrhenius": arrhenius_curve}


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("anchored", [True, False])
@pytest.mark.parametrize("scatter", [0.01, 0.15])
def test_values_and_covariance_are_those_of_a_general_least_squares_engine(form, anchored, scatter):
    T = WITH_REFERENCE if anchored else OFF_REFERENCE
    law = ARRHENIUS_LAW if form == "arrhenius" else WLF_LAW
    y = scattered(law, T, scatter, 7, T_REF if anchored else None)
    fit = fit_table(T, y, T_REF, form)
    used = T != T_REF
    start = TRUTH[form] if anchored else (*TRUTH[form], 0.0)
    options = {"ftol": 1e-15, "xtol": 1e-15, "gtol": 1e-15, "maxfev": 10_000, "x_scale": np.maximum(np.abs(start), 1.0)}
    values, cov = scipy.optimize.curve_fit(CURVES[form], T[used], y[used], p0=start, method="trf", **options)
    # the engine takes its derivatives by differences: seven digits of the constants, five of their covariance
    np.testing.assert_allclose(fit.values, values, rtol=1e-6, atol=1e-7)
    spread = np.sqrt(np.diag(cov))
    np.testing.assert_allclose(covariance(fit) / np.outer(spread, spread), cov / np.outer(spread, spread), atol=1e-4)
    residuals = y[used] - CURVES[form](T[used], *values)
    assert fit.residual_decades == pytest.approx(math.sqrt(residuals @ residuals / fit.degrees_of_freedom), rel=1e-9)
    worst = int(np.argmax(np.abs(residuals)))
    assert (fit.largest_residual, fit.largest_residual_at) == pytest.approx(
        (residuals[worst], T[used][worst]), rel=1e-5
    )


def test_arrhenius_is_the_straight_line_of_linear_regression():
    y = scattered(ARRHENIUS_LAW, OFF_REFERENCE, 0.1, 3)
    fit = fit_table(OFF_REFERENCE, y, T_REF, "arrhenius")
    line = scipy.stats.linregress(1.0 / OFF_REFERENCE - 1.0 / T_REF, y)
    # closed form on both sides
    np.testing.assert_allclose(fit.values, [line.slope * LN10 * R, line.intercept], rtol=1e-9)
    np.testing.assert_allclose(fit.standard_errors, [line.stderr * LN10 * R, line.intercept_stderr], rtol=1e-9)


# statistics ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("form", "law", "truth"),
    [
        ("wlf", WLF_LAW, (14.2, 61.0)),
        ("vft", WLF_LAW, (B, T_INF)),
        ("arrhenius", ARRHENIUS_LAW, (120e3,)),
    ],
)
@pytest.mark.parametrize("anchored", [True, False])
def test_ninety_five_percent_intervals_hold_the_truth_in_ninety_to_ninety_eight_of_a_hundred_tables(
    form, law, truth, anchored
):
    """Binomial with 100 tables: 90 to 98 is where the count of a 95 % interval lies in 93 of 100 cases, other seeds."""
    T = WITH_REFERENCE if anchored else OFF_REFERENCE
    truth = np.array(truth if anchored else (*truth, 0.0))
    hits = np.zeros(truth.size)
    variance = 0.0
    for seed in range(100):
        fit = fit_table(T, scattered(law, T, 0.08, 5000 + seed, T_REF if anchored else None), T_REF, form)
        half = fit.standard_errors * scipy.stats.t.ppf(0.975, fit.degrees_of_freedom)
        np.testing.assert_allclose(fit.half_widths(), half, rtol=1e-9)
        hits += np.abs(fit.values - truth) <= half
        variance += fit.residual_decades**2 / 100
    assert np.all((hits >= 90) & (hits <= 98)), hits
    # the mean of 100 variances with 6 or more degrees of freedom scatters by sqrt(2/600) = 6 % at the most: 3 of those
    assert variance == pytest.approx(0.08**2, rel=0.18)


def test_a_point_at_the_reference_with_exactly_zero_is_a_definition_and_any_other_value_a_measurement():
    y = scattered(WLF_LAW, WITH_REFERENCE, 0.05, 1, T_REF)
    anchored = fit_table(WITH_REFERENCE, y, T_REF, "wlf")
    assert (anchored.anchored, anchored.points, anchored.names) == (True, 8, ("C1", "C2"))
    assert anchored.level == 0.0
    free = fit_table(WITH_REFERENCE, np.where(WITH_REFERENCE == T_REF, 1e-3, y), T_REF, "wlf")
    assert (free.anchored, free.points, free.names) == (False, 9, ("C1", "C2", "level"))


@pytest.mark.parametrize("anchored", [True, False])
@pytest.mark.parametrize("form", FORMS)
def test_the_law_is_one_at_its_reference_and_the_level_carries_the_rest(form, anchored):
    T = WITH_REFERENCE if anchored else OFF_REFERENCE
    y = scattered(WLF_LAW, T, 0.05, 2, T_REF if anchored else None)
    fits = [fit_table(T, y, T_REF, form, at=at) for at in (None, 380.0)]
    curves = [fit.level + decades(fit.law, T) for fit in fits]
    np.testing.assert_allclose(curves[0], curves[1], atol=1e-11)  # one curve, 10 decades high, to rounding
    for fit, T_ref in zip(fits, (T_REF, 380.0), strict=True):
        assert fit.law.T_ref == T_ref
        assert fit.law.ln_shift(T_ref) == 0.0
    assert fits[1].level == pytest.approx(fits[0].level + decades(fits[0].law, 380.0), abs=1e-11)


def test_a_shifted_table_gives_the_same_law_and_another_level():
    y = scattered(WLF_LAW, OFF_REFERENCE, 0.05, 4)
    one, other = (fit_table(OFF_REFERENCE, y + shift, T_REF, "wlf") for shift in (0.0, 2.5))
    np.testing.assert_allclose(other.values, one.values + np.array([0.0, 0.0, 2.5]), rtol=1e-9)
    np.testing.assert_allclose(other.standard_errors, one.standard_errors, rtol=1e-6)


def test_standard_errors_at_a_moved_reference_are_those_of_the_delta_method():
    """C1' = C1 C2/C2', C2' = C2 + (T' - T_ref), Ferry's rule, differentiated by hand."""
    y = scattered(WLF_LAW, WITH_REFERENCE, 0.05, 5, T_REF)
    old, new = fit_table(WITH_REFERENCE, y, T_REF, "wlf"), fit_table(WITH_REFERENCE, y, T_REF, "wlf", at=T_REF + 20.0)
    C1, C2 = old.values
    moved = C2 + 20.0
    np.testing.assert_allclose(new.values, [C1 * C2 / moved, moved], rtol=1e-10)
    J = np.array([[C2 / moved, C1 / moved - C1 * C2 / moved**2], [0.0, 1.0]])
    np.testing.assert_allclose(covariance(new), J @ covariance(old) @ J.T, rtol=1e-6)


def test_wlf_and_vft_are_one_law_with_one_residual():
    y = scattered(WLF_LAW, OFF_REFERENCE, 0.1, 6)
    wlf, vft = (fit_table(OFF_REFERENCE, y, T_REF, form) for form in ("wlf", "vft"))
    assert wlf.residual_decades == vft.residual_decades
    assert wlf.aicc == vft.aicc
    assert wlf.standard_errors[1] == vft.standard_errors[1] == wlf.pole_error  # of C2 and of T_inf
    assert wlf.values[0] * wlf.values[1] * LN10 == pytest.approx(vft.values[0], rel=1e-12)


def test_constants_are_written_for_the_base_and_the_gas_constant_asked_for():
    y = scattered(WLF_LAW, OFF_REFERENCE, 0.1, 6)
    ten, e = (fit_table(OFF_REFERENCE, y, T_REF, "wlf", base=base) for base in (10, "e"))
    np.testing.assert_allclose(e.values[0] / ten.values[0], LN10, rtol=1e-14)
    np.testing.assert_allclose(e.standard_errors[0] / ten.standard_errors[0], LN10, rtol=1e-14)
    fits = [fit_table(OFF_REFERENCE, y, T_REF, "arrhenius", gas_constant=R * k) for k in (1.0, 2.0)]
    assert fits[1].values[0] == pytest.approx(2.0 * fits[0].values[0], rel=1e-14)


# which form ----------------------------------------------------------------------------------------------------------


def verdict(T, y, T_ref=T_REF):
    return support([fit_table(T, y, T_ref, form) for form in ("arrhenius", "wlf")])


@pytest.mark.parametrize("seed", range(10))
def test_an_offset_is_supported_where_the_table_bends_clearly(seed):
    sentence = verdict(OFF_REFERENCE, scattered(WLF_LAW, OFF_REFERENCE, 0.1, seed))
    assert sentence.startswith("The data support an offset temperature (WLF or VFT, which are one law in two forms)")


WIDE = np.linspace(260.0, 480.0, 30)


def test_plain_arrhenius_is_supported_where_the_table_confines_the_pole_to_absolute_zero():
    """An offset that is not there passes for one where chi-square with one degree of freedom exceeds 6: 1 or 2 in 100."""
    sentences = [verdict(WIDE, scattered(ARRHENIUS_LAW, WIDE, 0.03, seed)) for seed in range(40)]
    assert sum("support an offset" in sentence for sentence in sentences) <= 2
    right = sum(sentence.startswith("The data support plain Arrhenius") for sentence in sentences)
    assert right >= 30  # its weight is below one half where chi-square exceeds 2.3, in 13 of 100 tables


@pytest.mark.parametrize("law", [WLF(C1=8.0, C2=200.0, T_ref=T_REF), ARRHENIUS_LAW])
def test_the_data_do_not_tell_where_scatter_hides_the_bend(law):
    T = T_REF + np.linspace(-10.0, 15.0, 12)
    unclear = [verdict(T, scattered(law, T, 0.15, seed)) for seed in range(20)]
    assert sum(sentence.startswith("The data do not tell") for sentence in unclear) >= 18


def test_too_few_points_to_compare_are_said_to_be_too_few():
    T = T_REF + np.array([-20.0, 0.0, 20.0, 40.0])
    sentence = verdict(T, decades(WLF_LAW, T))
    assert sentence.startswith("The data do not tell")
    assert "needs 5 points beside T_ref, and there are 3" in sentence
    alone = support([fit_table(T[1:3], decades(WLF_LAW, T[1:3]), T_REF, "arrhenius")])
    assert "too few" in alone


def test_a_table_that_bends_less_than_arrhenius_says_that_its_pole_is_below_absolute_zero():
    law = VFT(B=3e5, T_inf=-600.0, T_ref=T_REF)
    assert "below absolute zero" in verdict(WIDE, scattered(law, WIDE, 0.01, 1))


def test_weights_add_up_to_one_and_follow_the_criteria():
    fits = [fit_table(OFF_REFERENCE, scattered(ARRHENIUS_LAW, OFF_REFERENCE, 0.1, 1), T_REF, f) for f in FORMS]
    weights = akaike_weights(fits)
    assert sum(weights) == pytest.approx(1.0, rel=1e-15)
    assert weights.offset / weights.arrhenius == pytest.approx(math.exp(0.5 * (fits[2].aicc - fits[0].aicc)), rel=1e-12)


# robust --------------------------------------------------------------------------------------------------------------


@settings(max_examples=100)
@given(
    count=st.integers(3, 60),
    C1=st.floats(2.0, 30.0),
    C2=st.floats(25.0, 400.0),
    low=st.floats(-0.8, -0.05),
    span=st.floats(5.0, 150.0),
    scatter=st.floats(0.0, 0.5),
    seed=st.integers(0, 10**6),
    form=st.sampled_from(FORMS),
)
def test_any_table_that_falls_gives_a_law_without_a_pole_among_its_points_and_no_worse_than_the_truth(
    count, C1, C2, low, span, scatter, seed, form
):
    law = WLF(C1=C1, C2=C2, T_ref=T_REF)
    T = T_REF + low * C2 + np.linspace(0.0, span, count)
    y = scattered(law, T, scatter, seed)
    assume(np.polyfit(T, y, 1)[0] < -10.0 * scatter / span)  # else scatter may hide the fall
    fit = fit_table(T, y, T_REF, form)
    assert fit.law.pole is None or fit.law.pole < T.min()
    residuals = y - fit.level - decades(fit.law, T)
    assert abs(fit.largest_residual) == pytest.approx(np.abs(residuals).max(), abs=1e-7)
    if form != "arrhenius" and not fit.note:
        true = y - decades(law, T)
        assert residuals @ residuals <= true @ true * (1.0 + 1e-9) + 1e-18


@pytest.mark.parametrize("count", [3, 30, 1000])
def test_a_straight_table_says_that_the_search_for_the_pole_ended(count):
    T = np.linspace(300.0, 360.0, count)
    fit = fit_table(T, 0.1 * (333.33 - T), 333.33, "wlf")
    assert "below -10000 K" in fit.note
    assert np.isinf(fit.standard_errors[:2]).all()
    assert not np.isnan(fit.correlation).any()


def test_a_step_at_the_lowest_point_says_that_the_search_for_the_pole_ended():
    fit = fit_table([300.0, 310.0, 320.0, 330.0, 340.0], [9.0, 1e-4, 0.0, -1e-4, -2e-4], 325.0, "vft")
    assert "lowest temperature" in fit.note
    assert fit.law.pole < 300.0


@pytest.mark.parametrize(
    ("form", "T", "y", "text"),
    [
        ("wlf", [340.0, 360.0], [2.0, -1.0], r"takes 3 at different temperatures, more .* and there are 2"),
        ("vft", [T_REF, 360.0], [0.0, -1.0], r"takes 2 at different temperatures beside that at T_ref.* there is 1"),
        ("arrhenius", [360.0, 360.0], [-1.0, -1.1], r"arrhenius has 1 constant .* takes 2 .* there is 1"),
        ("arrhenius", [T_REF], [0.0], r"takes 1 .* beside that at T_ref, .* there are 0"),
        ("wlf", [360.0, 360.0, 360.0, 340.0], [-1.0, -1.1, -0.9, 1.0], "there are 2"),
    ],
)
def test_too_few_points_are_refused_with_the_number_that_is_needed(form, T, y, text):
    with pytest.raises(ConversionError, match=text):
        fit_table(T, y, T_REF, form)


def test_as_many_points_as_constants_give_the_curve_through_them_without_errors():
    T = np.array([340.0, 350.0, 380.0])
    fit = fit_table(T, decades(WLF_LAW, T), T_REF, "wlf")
    np.testing.assert_allclose(fit.values, [14.2, 61.0, 0.0], rtol=1e-10, atol=1e-10)
    assert fit.residual_decades is None
    assert np.isinf(fit.half_widths()).all()


def test_repeated_measurements_at_one_temperature_all_count():
    T = np.repeat([330.0, 345.0, 360.0, 400.0], 3)
    fit = fit_table(T, scattered(WLF_LAW, T, 0.05, 9), T_REF, "wlf")
    assert (fit.points, fit.degrees_of_freedom) == (12, 9)


@pytest.mark.parametrize("form", FORMS)
def test_a_table_that_rises_is_refused(form):
    with pytest.raises(ConversionError, match="do not fall with temperature"):
        fit_table([300.0, 320.0, 340.0, 360.0], [-1.0, 0.0, 1.0, 2.5], 320.0, form)


def test_a_reference_below_the_fitted_pole_is_refused():
    with pytest.raises(PoleError):
        fit_table(OFF_REFERENCE, decades(WLF_LAW, OFF_REFERENCE), T_REF, "wlf", at=280.0)


@pytest.mark.parametrize(
    ("arguments", "name"),
    [
        (([], [], 300.0, "wlf"), "T"),
        (([300.0, -1.0], [0.0, 1.0], 300.0, "wlf"), "T"),
        (([300.0, 310.0], [0.0], 300.0, "wlf"), "log10_a"),
        (([300.0, 310.0], [0.0, math.nan], 300.0, "wlf"), "log10_a"),
        (([300.0, 310.0], [0.0, 1.0], 0.0, "wlf"), "T_ref"),
        (([300.0, 310.0], [0.0, 1.0], 300.0, "polynomial"), "form"),
    ],
)
def test_arguments_that_make_no_sense_are_refused_by_name(arguments, name):
    with pytest.raises(ParameterError) as caught:
        fit_table(*arguments)
    assert caught.value.name == name


# in a conversion -----------------------------------------------------------------------------------------------------


def test_a_conversion_of_a_table_fits_its_own_points_and_only_those_in_the_range():
    y = scattered(WLF_LAW, OFF_REFERENCE, 0.05, 8)
    table = Table(T=OFF_REFERENCE, log10_a=y, T_ref=T_REF)
    whole = convert_law(table, "wlf")
    np.testing.assert_array_equal(whole.fit.values, fit_table(OFF_REFERENCE, y, T_REF, "wlf").values)
    assert (whole.method, whole.exact, whole.fitted_range) == ("least-squares", False, (336.15, 414.15))
    inside = (OFF_REFERENCE >= 345.0) & (OFF_REFERENCE <= 400.0)
    part = convert_law(table, "wlf", T_range=(345.0, 400.0))
    np.testing.assert_array_equal(part.fit.values, fit_table(OFF_REFERENCE[inside], y[inside], T_REF, "wlf").values)
    assert part.fitted_range == (OFF_REFERENCE[inside].min(), OFF_REFERENCE[inside].max())


@pytest.mark.parametrize("T_ref", [None, 370.0])
def test_the_largest_error_of_a_conversion_is_that_between_card_and_card(T_ref):
    table = Table(T=OFF_REFERENCE, log10_a=scattered(WLF_LAW, OFF_REFERENCE, 0.05, 8), T_ref=T_REF)
    result = convert_law(table, "vft", T_ref=T_ref)
    T = np.linspace(*result.fitted_range, 20001)
    error = np.abs(math.log(result.time_factor) + result.law.ln_shift(T) - table.ln_shift(T)) / LN10
    assert result.largest_error_decades == pytest.approx(error.max(), rel=1e-5)  # of a grid of 4 mK
    assert result.error_at == pytest.approx(T[error.argmax()], abs=0.02)
    assert result.time_factor == pytest.approx(10.0**result.fit.level, rel=1e-12)


def test_the_anchor_of_a_table_holds_the_curve_even_from_outside_the_range():
    y = scattered(WLF_LAW, WITH_REFERENCE, 0.05, 8, T_REF)
    result = convert_law(Table(T=WITH_REFERENCE, log10_a=y, T_ref=T_REF), "wlf", T_range=(360.0, 420.0))
    assert result.fit.anchored
    assert result.time_factor == 1.0
    assert result.fitted_range[0] > 360.0


def test_least_squares_without_points_is_refused():
    with pytest.raises(ConversionError, match="shift law wlf has none"):
        convert_law(WLF_LAW, "arrhenius", T_range=(340.0, 400.0), fit="least-squares")
    table = Table(T=OFF_REFERENCE, log10_a=decades(WLF_LAW, OFF_REFERENCE), T_ref=T_REF)
    with pytest.raises(ConversionError, match="no point from 500 K"):
        convert_law(table, "wlf", T_range=(500.0, 600.0))
