"""What every shift law keeps to."""

import math
import subprocess
import sys

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.errors import PoleError, ShiftRangeError
from matlib.shift import VFT, WLF, Arrhenius, ShiftLaw

# ln a_T goes to 200 here: two or three roundings of it give 1e-13 of a_T
RATE = dict(rtol=1e-13, atol=0.0)


def test_ln_shift_is_the_text_book_formula(law, exact):
    T = np.concatenate((np.linspace(302.0, 450.0, 60), [law.T_ref]))
    expected = np.array([float(exact(law, t)) for t in T])
    # one rounding of T - T_ref, and constants of a crossover of order 10
    np.testing.assert_allclose(law.ln_shift(T), expected, rtol=2e-15, atol=2e-14)


def test_mean_rate_is_the_integral_over_the_ramp(law, exact_mean_rate):
    ramps = [(305.0, 440.0), (352.0, 352.5), (345.0, 361.0), (440.0, 310.0), (329.0, 330.0), (350.0, 350.000001)]
    expected = [float(exact_mean_rate(law, *ramp)) for ramp in ramps]
    np.testing.assert_allclose(law.mean_rate(*np.transpose(ramps)), expected, **RATE)


def test_mean_rate_of_no_ramp_is_the_point_rate(law):
    T = np.linspace(302.0, 450.0, 41)
    np.testing.assert_array_equal(law.mean_rate(T, T), np.exp(-law.ln_shift(T)))


def test_mean_rate_is_the_same_up_and_down(law):
    T = np.linspace(302.0, 450.0, 41)
    np.testing.assert_array_equal(law.mean_rate(T, T[::-1]), law.mean_rate(T[::-1], T))


def test_mean_rates_of_two_halves_average_to_that_of_the_whole(law):
    halves = 0.5 * (law.mean_rate(310.0, 350.0) + law.mean_rate(350.0, 390.0))
    np.testing.assert_allclose(halves, law.mean_rate(310.0, 390.0), **RATE)


def test_arrays_of_any_shape_and_scalars_are_answered_in_their_shape(law):
    T = np.full((2, 3), 340.0)
    assert law.ln_shift(T).shape == (2, 3)
    assert np.shape(law.ln_shift(340.0)) == ()
    assert law.ln_shift([]).shape == (0,)
    assert law.mean_rate(T, 350.0).shape == (2, 3)
    assert law.mean_rate(T[:, :1], T[:1, :]).shape == (2, 3)
    assert law.mean_rate([], []).shape == (0,)
    assert law.ln_shift(340) == law.ln_shift(340.0)


@pytest.mark.parametrize("T", [0.0, -3.0, math.nan, math.inf])
def test_temperatures_that_are_none_are_refused(law, T):
    for ask in (law.ln_shift, lambda T: law.mean_rate(T, 350.0), lambda T: law.mean_rate(350.0, T)):
        with pytest.raises(ShiftRangeError) as caught:
            ask([340.0, T])
        assert caught.value.law == law.name


def test_laws_cannot_be_changed(law):
    with pytest.raises((AttributeError, TypeError)):  # CPython says TypeError where T_ref is a property
        law.T_ref = 300.0


def test_the_laws_are_there_without_loading_a_heavy_library():
    heavy = "{'scipy', 'numba', 'matplotlib', 'importlib.metadata'}"
    code = f"import sys, matlib.shift; sys.exit(str({heavy} & set(sys.modules)) if {heavy} & set(sys.modules) else 0)"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (run.returncode, run.stderr) == (0, "")


def test_a_class_without_a_formula_is_no_law():
    class Half(ShiftLaw):
        name = "half"
        T_ref = 300.0

    with pytest.raises(TypeError, match="ln_shift"):
        Half()


POLED = {
    "wlf": WLF(C1=17.44, C2=51.6, T_ref=373.15),
    "vft": VFT(B=2000.0, T_inf=321.55, T_ref=373.15),
}


@pytest.mark.parametrize("law", POLED.values(), ids=POLED.keys())
@pytest.mark.parametrize("below", [0.0, 1e-9, 20.0])
def test_at_and_below_the_pole_every_method_names_the_worst_temperature(law, below):
    worst = law.pole - below
    for ask in (law.ln_shift, lambda T: law.mean_rate(T, 373.15), lambda T: law.mean_rate(373.15, T)):
        with pytest.raises(PoleError) as caught:
            ask([330.0, worst, law.pole, 380.0])
        assert caught.value.temperature == worst
        assert caught.value.limit == law.pole
        assert f"shift law {law.name}: no shift factor at" in str(caught.value)
        assert "pole T_inf = 321.55 K (48.4 degC)" in str(caught.value)


@pytest.mark.parametrize("law", POLED.values(), ids=POLED.keys())
@pytest.mark.parametrize("above", [1e-9, 1e-6, 1e-3, 1.0])
def test_a_ramp_from_just_above_the_pole_is_integrated(law, above, exact_mean_rate):
    # within 1 K of the pole the rate is below exp(-1900): all that counts is the length of the ramp
    cold, counts = law.pole + above, law.pole + 1.0
    expected = float(exact_mean_rate(law, counts, 400.0)) * (400.0 - counts) / (400.0 - cold)
    np.testing.assert_allclose(law.mean_rate(cold, 400.0), expected, **RATE)


def test_a_quench_into_the_glassy_range_underflows_and_is_never_nan():
    law = POLED["vft"]
    assert law.mean_rate(321.56, 322.0) == 0.0
    assert law.mean_rate(322.0, 321.56) == 0.0
    cold = Arrhenius(activation_energy=1e5, T_ref=300.0)
    assert cold.mean_rate(1e-300, 1e-3) == 0.0
    assert np.isfinite(cold.ln_shift(5e-324))


def test_a_rate_that_overflows_is_refused_with_its_reason():
    law = Arrhenius(activation_energy=1e6, T_ref=100.0)
    for ask in (law.ln_shift, lambda T: law.mean_rate(100.0, T)):
        with pytest.raises(ShiftRangeError, match=r"1/a_T overflows.*normalised at T_ref = 100 K") as caught:
            ask(300.0)
        assert caught.value.temperature == 300.0


positive = st.floats(min_value=1.0, max_value=40.0)


@settings(max_examples=100, deadline=None)
@given(C1=positive, C2=st.floats(20.0, 120.0), T=st.tuples(st.floats(0.0, 1.0), st.floats(0.0, 1.0)))
def test_the_family_is_normalised_and_falls_with_temperature(C1, C2, T):
    wlf = WLF(C1=C1, C2=C2, T_ref=350.0)
    vft = VFT(B=math.log(10.0) * C1 * C2, T_inf=350.0 - C2, T_ref=350.0)
    low, high = sorted(340.0 + 60.0 * t for t in T)
    for law in (wlf, vft):
        assert law.ln_shift(350.0) == 0.0
        assert law.ln_shift(low) >= law.ln_shift(high)
        slow, fast = np.exp(-law.ln_shift([low, high]))
        # a mean lies between the ends; 1e-14 for rounding
        assert slow * (1.0 - 1e-14) <= law.mean_rate(low, high) <= fast * (1.0 + 1e-14)
