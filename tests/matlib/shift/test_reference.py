import math
from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.errors import ConversionError, ParameterError, PoleError
from matlib.shift import WLF, Arrhenius, MeasuredRange, NoShift, ShiftLaw, Table, move_reference, time_factor

T = np.linspace(303.0, 449.0, 51)
SPAN = 1e-13  # promised, of values up to 100; a polynomial recentred by 90 K rounds no worse


@pytest.mark.parametrize("T_new", [320.0, 353.15, 410.0])
def test_a_moved_law_is_the_old_one_less_its_value_at_the_new_reference(law, T_new):
    moved = move_reference(law, T_new)
    ln_factor = math.log(time_factor(law, T_new))
    assert moved.T_ref == T_new
    assert type(moved) is type(law)
    np.testing.assert_allclose(moved.ln_shift(T) + ln_factor, law.ln_shift(T), rtol=SPAN, atol=1e-12)


def test_a_moved_law_is_one_at_its_new_reference(law):
    # 350 K, inside the range of those that hold; a table is lowered by a rounded value
    assert float(move_reference(law, 350.0).ln_shift(350.0)) == pytest.approx(0.0, abs=1e-14)


def test_a_held_law_keeps_its_clock_when_the_reference_moves_out_of_its_range():
    inner = WLF(C1=14.2, C2=61.0, T_ref=353.15)
    law = MeasuredRange(law=inner, low=330.0, high=370.0, outside="hold")
    moved, factor = move_reference(law, 410.0), time_factor(law, 410.0)
    assert factor == time_factor(inner, 410.0)
    np.testing.assert_allclose(math.log(factor) + moved.ln_shift(T), law.ln_shift(T), rtol=SPAN, atol=1e-12)


@settings(max_examples=100, deadline=None)
@given(C1=st.floats(1.0, 30.0), C2=st.floats(25.0, 150.0), there=st.floats(-15.0, 120.0))
def test_there_and_back_changes_nothing(C1, C2, there):
    law = WLF(C1=C1, C2=C2, T_ref=350.0)
    moved = move_reference(law, 350.0 + there)
    back = move_reference(moved, 350.0)
    # C2 + there rounds at 1e-14 of C2 while 10 K or more above the pole
    assert (pytest.approx(C1, rel=1e-13), pytest.approx(C2, rel=1e-13)) == (back.C1, back.C2)
    assert time_factor(law, moved.T_ref) * time_factor(moved, 350.0) == pytest.approx(1.0, rel=1e-12)
    assert pytest.approx(C1 * C2, rel=1e-15) == moved.C1 * moved.C2
    assert moved.T_ref - moved.C2 == pytest.approx(350.0 - C2, rel=1e-14)


def test_a_table_that_is_not_zero_at_its_reference_gets_there():
    law = Table(T=[300.0, 310.0], log10_a=[1.5, 0.5], T_ref=310.0)
    assert time_factor(law, 310.0) == pytest.approx(10.0**0.5, rel=1e-15)
    np.testing.assert_allclose(move_reference(law, 310.0).log10_a, [1.0, 0.0], atol=1e-15)


def test_a_reference_at_or_below_the_pole_is_refused():
    law = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    with pytest.raises(PoleError):
        move_reference(law, 300.0)
    with pytest.raises(PoleError):
        time_factor(law, 300.0)
    with pytest.raises(ParameterError):
        move_reference(law, -1.0)


def test_a_factor_that_no_double_holds_is_refused():
    with pytest.raises(ConversionError, match=r"relaxation times would change by 10\^"):
        time_factor(WLF(C1=17.44, C2=51.6, T_ref=373.15), 322.0)


def test_no_shift_moves_freely():
    assert move_reference(NoShift(), 400.0).T_ref == 400.0
    assert time_factor(NoShift(), 400.0) == 1.0


@dataclass(frozen=True)
class Linear(ShiftLaw):
    """A law that the package does not know."""

    name = "linear"
    T_ref = 300.0

    def ln_shift(self, T):
        return -0.1 * (np.asarray(T) - 300.0)


def test_a_law_of_unknown_form_is_refused():
    with pytest.raises(ConversionError, match="shift law linear cannot be moved"):
        move_reference(Linear(), 310.0)


def test_a_gas_constant_of_its_own_stays():
    assert move_reference(Arrhenius(activation_energy=1e5, T_ref=300.0, gas_constant=8.3), 310.0).gas_constant == 8.3
