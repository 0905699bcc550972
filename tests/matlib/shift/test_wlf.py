import math

import numpy as np
import pytest

from matlib.errors import ParameterError, PoleError
from matlib.shift import WLF


def test_constants_and_base_are_kept_as_given():
    law = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    assert (law.C1, law.C2, law.T_ref, law.base, law.name) == (17.44, 51.6, 373.15, 10, "wlf")
    assert WLF(C1=40.0, C2=51.6, T_ref=373.15, base="e").C1 == 40.0


def test_a_constant_of_base_e_is_larger_by_ln_10():
    ten = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    e = WLF(C1=17.44 * math.log(10.0), C2=51.6, T_ref=373.15, base="e")
    T = np.linspace(330.0, 500.0, 18)
    np.testing.assert_array_equal(ten.ln_shift(T), e.ln_shift(T))
    np.testing.assert_array_equal(ten.mean_rate(T, 400.0), e.mean_rate(T, 400.0))


def test_the_pole_lies_C2_below_the_reference():
    assert WLF(C1=17.44, C2=50.0, T_ref=373.0).pole == 323.0


def test_next_to_the_pole_it_never_divides_by_zero():
    law = WLF(C1=17.44, C2=373.0, T_ref=373.15)  # a pole at 0.15 K, where T - T_ref rounds to -C2
    T = math.nextafter(law.pole, math.inf)
    assert law.C2 + (T - law.T_ref) == 0.0
    with pytest.raises(PoleError) as caught:
        law.ln_shift([300.0, T])
    assert caught.value.temperature == T


@pytest.mark.parametrize(
    ("name", "value"),
    [("C1", 0.0), ("C1", -3.0), ("C2", -51.6), ("C2", math.inf), ("T_ref", 0.0), ("T_ref", math.nan), ("base", 2)],
)
def test_constants_that_are_not_admissible_are_named(name, value):
    with pytest.raises(ParameterError) as caught:
        WLF(**{"C1": 17.44, "C2": 51.6, "T_ref": 373.15, name: value})
    assert caught.value.name == name
