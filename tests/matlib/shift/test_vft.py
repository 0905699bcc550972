import math

import pytest

from matlib.errors import ParameterError
from matlib.shift import VFT


def test_the_pole_is_T_inf():
    law = VFT(B=1000.0, T_inf=200.0, T_ref=300.0)
    assert (law.pole, law.name, law.knots) == (200.0, "vft", ())


def test_a_pole_below_absolute_zero_is_never_met():
    law = VFT(B=1000.0, T_inf=-50.0, T_ref=300.0)
    # 1000/(1 + 50) - 1000/350
    assert law.ln_shift(1.0) == pytest.approx(1000.0 / 51.0 - 1000.0 / 350.0, rel=1e-15)


@pytest.mark.parametrize(
    ("name", "value"),
    [("B", 0.0), ("B", math.nan), ("T_inf", math.inf), ("T_inf", 300.0), ("T_inf", 400.0), ("T_ref", -1.0)],
)
def test_constants_that_are_not_admissible_are_refused(name, value):
    with pytest.raises(ParameterError):
        VFT(**{"B": 1000.0, "T_inf": 200.0, "T_ref": 300.0, name: value})


def test_a_reference_at_the_pole_is_explained():
    with pytest.raises(ParameterError, match=r"`T_ref` must be above the pole T_inf = 310 K \(got 300 K\)"):
        VFT(B=1000.0, T_inf=310.0, T_ref=300.0)
