import itertools
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from matlib.elastic import elastic_constants
from matlib.errors import ParameterError

NAMES = ("E", "G", "K", "nu")


@pytest.mark.parametrize("pair", list(itertools.combinations(NAMES, 2)))
@given(modulus=st.floats(1e-3, 1e12), nu=st.floats(-0.9, 0.49))
def test_every_pair_gives_the_same_solid(pair, modulus, nu):
    # truth: E and nu are free, G and K by Hooke's law
    solid = {"E": modulus, "nu": nu, "G": modulus / (2.0 * (1.0 + nu)), "K": modulus / (3.0 * (1.0 - 2.0 * nu))}
    found = elastic_constants(**{name: solid[name] for name in pair})
    for name in ("E", "G", "K"):
        # 3 G - E and 9 K - E lose at most a factor 1/(1 - 2 nu) or 1/(1 + nu), below 50 and 10, of a few roundings
        assert getattr(found, name) == pytest.approx(solid[name], rel=1e-13)
    assert found.nu == pytest.approx(nu, abs=1e-14)
    for name in pair:
        assert getattr(found, name) == solid[name]


@pytest.mark.parametrize("given_values", [{}, {"E": 1.0}, {"E": 1.0, "G": 0.4, "K": 0.6}])
def test_exactly_two_constants_are_asked_for(given_values):
    with pytest.raises(ParameterError, match="exactly two of E, G, K, nu"):
        elastic_constants(**given_values)


@pytest.mark.parametrize("name", ["E", "G", "K"])
@pytest.mark.parametrize("bad", [0.0, -1.0, math.nan, math.inf])
def test_a_modulus_is_finite_and_positive(name, bad):
    with pytest.raises(ParameterError) as caught:
        elastic_constants(**{name: bad, "nu": 0.3})
    assert caught.value.name == name


@pytest.mark.parametrize("bad", [-1.0, 0.5, 0.7, math.nan])
def test_a_poisson_ratio_lies_between_its_limits(bad):
    with pytest.raises(ParameterError) as caught:
        elastic_constants(E=1.0, nu=bad)
    assert caught.value.name == "nu"


@pytest.mark.parametrize(
    ("pair", "text"),
    [
        ({"E": 3.0, "G": 1.0}, r"`E` must be below 3 G = 3 Pa, where nu would be 0.5 \(got 3.0\)"),
        ({"E": 9.5, "G": 1.0}, "below 3 G"),
        ({"E": 9.0, "K": 1.0}, r"`E` must be below 9 K = 9 Pa, where nu would be -1 \(got 9.0\)"),
        ({"E": 20.0, "K": 1.0}, "below 9 K"),
        ({"E": 1e-300, "G": 1.0}, "nu"),
        ({"E": 1e-20, "K": 1.0}, "nu"),
    ],
)
def test_a_pair_that_belongs_to_no_solid_is_refused_with_its_limit(pair, text):
    with pytest.raises(ParameterError, match=text):
        elastic_constants(**pair)
