import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.shift import VFT, WLF, Arrhenius, Crossover, MeasuredRange, NoShift, Polynomial, Table, as_vft

T = np.linspace(335.0, 460.0, 60)


@settings(max_examples=100, deadline=None)
@given(C1=st.floats(1.0, 30.0), C2=st.floats(25.0, 150.0), base=st.sampled_from([10, "e"]))
def test_the_constants_of_wlf_make_the_same_law(C1, C2, base):
    wlf = WLF(C1=C1, C2=C2, T_ref=353.15, base=base)
    vft = VFT(**as_vft(wlf)._asdict())
    # T_inf is rounded to 3e-14 K, 6.85 K or more below T: 4e-15 relative; 1e-13 is the promise
    np.testing.assert_allclose(vft.ln_shift(T), wlf.ln_shift(T), rtol=1e-13, atol=1e-13)
    np.testing.assert_allclose(np.log(vft.mean_rate(T, 360.0)), np.log(wlf.mean_rate(T, 360.0)), rtol=1e-13, atol=1e-13)


def test_vft_and_arrhenius_give_theirs():
    assert as_vft(VFT(B=1000.0, T_inf=200.0, T_ref=300.0)) == (1000.0, 200.0, 300.0)
    assert as_vft(Arrhenius(activation_energy=8e4, T_ref=300.0, gas_constant=8.0)) == (1e4, 0.0, 300.0)
    assert as_vft(WLF(C1=2.0, C2=50.0, T_ref=300.0)) == (math.log(10.0) * 2.0 * 50.0, 250.0, 300.0)


@pytest.mark.parametrize(
    "law",
    [
        NoShift(),
        Polynomial(coefficients=[-0.1], T_ref=300.0),
        Table(T=[300.0, 310.0], log10_a=[1.0, 0.0], T_ref=310.0),
        Crossover(below=Arrhenius(activation_energy=1e5, T_ref=300.0), above=NoShift(), at=300.0),
        MeasuredRange(law=Arrhenius(activation_energy=1e5, T_ref=300.0), low=290.0, high=310.0),
    ],
    ids=lambda law: type(law).__name__,
)
def test_other_laws_are_not_of_the_family(law):
    assert as_vft(law) is None
