"""Reduced times of many laws at once: those of each law."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from matlib.errors import PoleError
from matlib.shift import SHIFT_RULES, VFT, WLF, Arrhenius, MeasuredRange, NoShift
from matlib.shift.family_ramp import integrated_by_law
from tests.strategies import COLD, HOT, arrhenius_laws, vft_laws, wlf_laws

FAMILY = st.one_of(law(COLD, HOT) for law in (wlf_laws, vft_laws, arrhenius_laws))
TEMPERATURES = st.lists(st.floats(COLD, HOT), min_size=2, max_size=6)


@given(st.lists(FAMILY, min_size=1, max_size=4), TEMPERATURES)
def test_each_is_what_the_law_by_itself_gives(laws, temperatures):
    T = np.array(temperatures)
    duration = np.linspace(0.0, 1e4, T.size - 1)
    got = integrated_by_law(laws, duration, T[:-1], T[1:])
    each = []
    for law in laws:
        try:
            each.append(SHIFT_RULES["integrated"](law, duration, T[:-1], T[1:]))
        except ValueError:
            assert got is None
            return
    assert got is not None
    for row, expected, law in zip(got, each, laws, strict=True):
        # the same formula; ln a_T, which may be large, is rounded in another order
        steepest = float(np.abs(law.ln_shift(T)).max())
        np.testing.assert_allclose(row, expected, rtol=1e-14 * (10.0 + steepest))


def test_a_temperature_that_never_changes_gives_the_same_rate_for_all():
    T = np.full(3, 350.0)
    law = WLF(C1=14.2, C2=61.0, T_ref=353.15)
    got = integrated_by_law([law, law], np.array([1.0, 2.0]), T[:-1], T[1:])
    np.testing.assert_allclose(got, np.exp(-law.ln_shift(350.0)) * np.array([[1.0, 2.0]] * 2), rtol=1e-14)


def test_a_law_that_is_not_of_the_family_leaves_it_to_each():
    T = np.array([350.0, 351.0])
    held = MeasuredRange(law=Arrhenius(activation_energy=8e4, T_ref=350.0), low=300.0, high=350.0, outside="hold")
    for other in (NoShift(), held):
        assert integrated_by_law([VFT(B=1e3, T_inf=200.0, T_ref=300.0), other], np.ones(1), T[:1], T[1:]) is None


@pytest.mark.parametrize("T", [[250.0, 300.0], [300.0, 260.0], [300.0, -1.0], [300.0, np.nan], [300.0, np.inf]])
def test_a_temperature_without_an_answer_is_left_to_the_law_to_refuse(T):
    laws = [VFT(B=1e3, T_inf=200.0, T_ref=300.0), VFT(B=1e3, T_inf=260.0, T_ref=300.0)]
    T = np.array(T)
    assert integrated_by_law(laws, np.ones(1), T[:1], T[1:]) is None
    if T.min() > 0.0 and np.all(np.isfinite(T)):
        with pytest.raises(PoleError):
            SHIFT_RULES["integrated"](laws[1], np.ones(1), T[:1], T[1:])


def test_a_rate_beyond_all_numbers_is_left_to_the_law_to_refuse():
    T = np.array([300.0, 500.0])
    assert integrated_by_law([VFT(B=6e5, T_inf=0.0, T_ref=300.0)], np.ones(1), T[:1], T[1:]) is None
