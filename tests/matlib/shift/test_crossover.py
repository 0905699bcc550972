import numpy as np
import pytest

from matlib.errors import ParameterError, PoleError
from matlib.shift import WLF, Arrhenius, Crossover, Polynomial, Table

COLD = Arrhenius(activation_energy=2e5, T_ref=340.0)
HOT = WLF(C1=14.2, C2=61.0, T_ref=353.15)


def test_the_parts_join_without_a_step():
    law = Crossover(below=COLD, above=HOT, at=345.0)
    below, above = law.ln_shift([np.nextafter(345.0, 0.0), 345.0])
    assert below == pytest.approx(above, abs=1e-12)  # a slope of 0.3/K over one rounding of T


@pytest.mark.parametrize("T_ref", [None, 320.0, 345.0, 400.0])
def test_it_is_one_at_its_reference_whichever_side_that_is_on(T_ref):
    law = Crossover(below=COLD, above=HOT, at=345.0, T_ref=T_ref)
    assert T_ref or law.T_ref == HOT.T_ref
    assert law.ln_shift(law.T_ref) == 0.0


def test_each_side_has_the_differences_of_its_own_law():
    law = Crossover(below=COLD, above=HOT, at=345.0, T_ref=320.0)
    for part, T in ((COLD, [310.0, 340.0]), (HOT, [350.0, 420.0])):
        np.testing.assert_allclose(np.diff(law.ln_shift(T)), np.diff(part.ln_shift(T)), rtol=1e-14)


def test_only_the_pole_of_the_lower_part_can_be_met():
    assert Crossover(below=COLD, above=HOT, at=345.0).pole is None
    law = Crossover(below=HOT, above=COLD, at=345.0)
    assert law.pole == HOT.pole
    with pytest.raises(PoleError) as caught:
        law.mean_rate(280.0, 350.0)
    assert caught.value.law == "crossover"
    assert caught.value.temperature == 280.0


def test_parts_that_have_no_answer_where_they_meet_are_refused():
    with pytest.raises(PoleError):
        Crossover(below=COLD, above=HOT, at=290.0)


def test_knots_are_those_of_each_part_on_its_own_side_and_the_meeting_point():
    table = Table(T=[300.0, 320.0, 340.0, 360.0], log10_a=[3.0, 2.0, 1.0, 0.0], T_ref=360.0)
    turns = Polynomial(coefficients=[-0.1, 1e-3], T_ref=340.0)  # turns at 390 K
    assert Crossover(below=table, above=turns, at=330.0).knots == (300.0, 320.0, 330.0, 390.0)


def test_a_meeting_point_that_is_no_temperature_is_refused():
    with pytest.raises(ParameterError, match="`at` must be finite and > 0 K"):
        Crossover(below=COLD, above=HOT, at=-1.0)
    with pytest.raises(ParameterError, match="`T_ref`"):
        Crossover(below=COLD, above=HOT, at=345.0, T_ref=-1.0)
