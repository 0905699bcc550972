import math

import numpy as np
import pytest

from matlib.errors import ParameterError
from matlib.shift import WLF, Arrhenius


def test_it_is_wlf_with_C2_equal_to_the_reference_in_kelvin():
    law = Arrhenius(activation_energy=1e5, T_ref=298.15)
    wlf = WLF(C1=law.B / 298.15, C2=298.15, T_ref=298.15, base="e")
    T = np.linspace(250.0, 400.0, 31)
    # |ln a_T| up to 26: relative rounding of the constants
    np.testing.assert_allclose(law.ln_shift(T), wlf.ln_shift(T), rtol=1e-13, atol=1e-14)
    np.testing.assert_allclose(law.mean_rate(T, 300.0), wlf.mean_rate(T, 300.0), rtol=1e-13)


def test_the_gas_constant_is_the_one_stated():
    law = Arrhenius(activation_energy=8000.0, T_ref=300.0, gas_constant=8.0)
    assert law.B == 1000.0
    assert law.ln_shift(200.0) == pytest.approx(1000.0 * (1 / 200.0 - 1 / 300.0), rel=1e-15)
    assert law.pole is None


@pytest.mark.parametrize(
    ("name", "value"),
    [("activation_energy", 0.0), ("activation_energy", -5.0), ("T_ref", 0.0), ("gas_constant", math.nan)],
)
def test_constants_that_are_not_admissible_are_named(name, value):
    with pytest.raises(ParameterError) as caught:
        Arrhenius(**{"activation_energy": 1e5, "T_ref": 300.0, name: value})
    assert caught.value.name == name
