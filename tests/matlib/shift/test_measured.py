import math

import numpy as np
import pytest

from matlib.errors import ParameterError, PoleError, ShiftRangeError
from matlib.shift import WLF, MeasuredRange, Table

LAW = WLF(C1=14.2, C2=61.0, T_ref=353.15)
T = np.linspace(310.0, 420.0, 23)


def ranged(outside, low=330.0, high=370.0):
    return MeasuredRange(law=LAW, low=low, high=high, outside=outside)


def test_extrapolate_is_the_law_itself():
    np.testing.assert_array_equal(ranged("extrapolate").ln_shift(T), LAW.ln_shift(T))
    np.testing.assert_array_equal(ranged("extrapolate").mean_rate(T, 350.0), LAW.mean_rate(T, 350.0))
    assert ranged("extrapolate").pole == LAW.pole


def test_hold_keeps_the_shift_factor_of_the_nearer_end():
    np.testing.assert_array_equal(ranged("hold").ln_shift(T), LAW.ln_shift(np.clip(T, 330.0, 370.0)))
    assert ranged("hold").ln_shift(10.0) == LAW.ln_shift(330.0)  # far below the pole
    assert ranged("hold").pole is None


@pytest.mark.parametrize(("start", "end"), [(310.0, 320.0), (400.0, 410.0)])
def test_held_all_along_a_ramp_passes_time_at_the_held_rate(start, end):
    law = ranged("hold")
    np.testing.assert_allclose(law.mean_rate(start, end), np.exp(-law.ln_shift(start)), rtol=1e-15)


def test_refuse_names_the_temperature_and_the_end_that_it_is_beyond():
    law = ranged("refuse")
    np.testing.assert_array_equal(law.ln_shift([330.0, 370.0]), LAW.ln_shift([330.0, 370.0]))
    for ask in (law.ln_shift, lambda T: law.mean_rate(350.0, T), lambda T: law.mean_rate(T, 350.0)):
        for bad, limit in ((329.0, 330.0), (371.0, 370.0)):
            with pytest.raises(ShiftRangeError, match="outside the measured range, which ends at") as caught:
                ask([350.0, bad])
            assert (caught.value.law, caught.value.temperature, caught.value.limit) == ("wlf", bad, limit)
            assert not isinstance(caught.value, PoleError)


def test_name_and_reference_are_those_of_the_law():
    law = ranged("refuse")
    assert (law.name, law.T_ref) == ("wlf", 353.15)


def test_knots_are_those_that_matter():
    table = Table(T=[300.0, 340.0, 380.0], log10_a=[2.0, 1.0, 0.0], T_ref=380.0)
    assert MeasuredRange(law=table, low=330.0, high=370.0).knots == (300.0, 340.0, 380.0)
    assert MeasuredRange(law=table, low=330.0, high=370.0, outside="hold").knots == (330.0, 340.0, 370.0)


def test_a_range_below_the_pole_raises_when_it_is_used():
    law = ranged("hold", low=280.0)
    with pytest.raises(PoleError):
        law.ln_shift(250.0)
    assert ranged("refuse", low=280.0).pole == LAW.pole


@pytest.mark.parametrize(
    ("change", "name"),
    [
        ({"low": -1.0}, "low"),
        ({"high": 330.0}, "high"),
        ({"high": math.inf}, "high"),
        ({"outside": "ignore"}, "outside"),
    ],
)
def test_ranges_and_policies_that_are_none_are_refused(change, name):
    with pytest.raises(ParameterError) as caught:
        MeasuredRange(**{"law": LAW, "low": 330.0, "high": 370.0, **change})
    assert caught.value.name == name
