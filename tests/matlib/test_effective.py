import math

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from matlib.effective import (
    equibiaxial_modulus,
    plane_strain_tension_modulus,
    poisson_ratio,
    shear_and_bulk_of_young,
    uniaxial_strain_modulus,
    uniaxial_stress_modulus,
)
from matlib.errors import ParameterError
from matlib.prony import PronySeries

SHEAR = PronySeries(equilibrium=1.0e7, moduli=[4.0e8, 3.0e8, 2.0e8, 1.0e8], times=[1e-2, 1.0, 30.0, 4e3])
BULK = PronySeries(equilibrium=2.0e9, moduli=[5.0e8, 8.0e8], times=[0.5, 1e3])
MELT_SHEAR = PronySeries(equilibrium=0.0, moduli=[4.0e8, 3.0e8], times=[1e-2, 1.0])
MELT_BULK = PronySeries(equilibrium=0.0, moduli=[9.0e8, 5.0e8], times=[0.1, 7.0])
MATERIALS = [
    pytest.param(SHEAR, BULK, id="solid"),
    pytest.param(SHEAR, PronySeries.elastic(3e9), id="elastic bulk"),
    pytest.param(MELT_SHEAR, BULK, id="liquid in shear"),
    pytest.param(MELT_SHEAR, MELT_BULK, id="liquid in both"),
]
MODES = [
    pytest.param(uniaxial_stress_modulus, lambda G, K: 9 * K * G / (3 * K + G), id="uniaxial stress"),
    pytest.param(equibiaxial_modulus, lambda G, K: 18 * K * G / (3 * K + 4 * G), id="equibiaxial stress"),
    pytest.param(plane_strain_tension_modulus, lambda G, K: 4 * G * (3 * K + G) / (3 * K + 4 * G), id="plane strain"),
    pytest.param(uniaxial_strain_modulus, lambda G, K: K + 4 * G / 3, id="uniaxial strain"),
]


@st.composite
def materials(draw):
    """Shear and bulk modulus with up to 6 terms each; the bulk relaxes no further than a tenth of itself."""
    count, bulk_count = draw(st.integers(0, 6)), draw(st.integers(0, 6))
    shares = st.floats(1e-6, 1.0)

    def series(size, instantaneous, relaxed):
        weights = np.array(draw(st.lists(shares, min_size=size, max_size=size)))
        times = [10.0**x for x in draw(st.lists(st.floats(-9.0, 9.0), min_size=size, max_size=size))]
        return PronySeries.from_fractions(instantaneous, relaxed * weights / max(weights.sum(), 1.0), times)

    return series(count, 1e9, 0.999), series(bulk_count, draw(st.floats(1e9, 1e11)), 0.9)


def carson(series, s):
    """Carson transform of a relaxation modulus in many digits, at a real or complex `s`."""
    terms = zip(series.moduli.tolist(), series.times.tolist(), strict=True)
    return mpmath.mpf(series.equilibrium) + mpmath.fsum(m * s * t / (1 + s * t) for m, t in terms)


def stepped(transform, xi):
    """Answer to a unit step, from its Carson transform by Talbot's inverse Laplace transform."""
    with mpmath.workdps(40):
        return float(mpmath.invertlaplace(lambda s: transform(s) / s, xi, method="talbot", dps=40))


@pytest.mark.parametrize(("modulus", "elastic"), MODES)
@pytest.mark.parametrize(("G", "K"), MATERIALS)
def test_effective_moduli_agree_with_a_numerical_inverse_laplace_transform(modulus, elastic, G, K):
    effective = modulus(G, K)
    for xi in (1e-3, 0.3, 20.0, 2e3):
        truth = stepped(lambda s: elastic(carson(G, s), carson(K, s)), xi)
        # times known to a rounding or two move the modulus by as much of the instantaneous one (r exp(-r) < 0.4)
        assert float(effective.relaxation(xi)) == pytest.approx(truth, rel=1e-13, abs=2e-15 * effective.instantaneous)


@pytest.mark.parametrize(("modulus", "elastic"), MODES)
@given(material=materials(), exponent=st.floats(-11.0, 11.0))
def test_effective_moduli_obey_the_elastic_relation_in_carson_transform(modulus, elastic, material, exponent):
    G, K = material
    effective = modulus(G, K)
    with mpmath.workdps(40):
        s = mpmath.mpf(10) ** exponent
        truth = elastic(carson(G, s), carson(K, s))
        # sums of positive numbers, each known to some ten roundings
        assert float(carson(effective, s) / truth) == pytest.approx(1.0, abs=1e-14)


@pytest.mark.parametrize(("modulus", "elastic"), MODES)
@given(material=materials())
def test_effective_moduli_have_the_elastic_limits(modulus, elastic, material):
    G, K = material
    effective = modulus(G, K)
    assert effective.instantaneous == pytest.approx(elastic(G.instantaneous, K.instantaneous), rel=2e-14)
    assert effective.equilibrium == pytest.approx(elastic(G.equilibrium, K.equilibrium), rel=2e-14)


@pytest.mark.parametrize(("modulus", "elastic"), MODES)
@pytest.mark.parametrize("equilibrium", [0.0, 5e6])
def test_shear_and_bulk_of_one_spectrum_give_that_spectrum(modulus, elastic, equilibrium):
    G = PronySeries(equilibrium=equilibrium, moduli=SHEAR.moduli, times=SHEAR.times)
    effective = modulus(G, G.scaled(7.0 / 3.0))
    assert effective.times.tolist() == G.times.tolist()
    np.testing.assert_allclose(effective.fractions, G.fractions, rtol=2e-15)  # each term on its own, some roundings
    assert effective.instantaneous == pytest.approx(elastic(1.0, 7.0 / 3.0) * G.instantaneous, rel=2e-15)


@pytest.mark.parametrize(("modulus", "elastic"), MODES)
def test_the_size_of_the_moduli_does_not_matter(modulus, elastic):
    huge, plain = modulus(SHEAR.scaled(1e200), BULK.scaled(1e200)), modulus(SHEAR, BULK)
    np.testing.assert_allclose(huge.moduli, plain.moduli * 1e200, rtol=1e-14)
    assert huge.instantaneous == pytest.approx(elastic(SHEAR.instantaneous, BULK.instantaneous) * 1e200, rel=1e-14)


def test_spectra_that_differ_at_the_end_alone_are_not_taken_for_one():
    G = PronySeries(equilibrium=0.0, moduli=[1.0], times=[1.0])
    K = PronySeries(equilibrium=1e-16, moduli=[1.0], times=[1.0])
    assert uniaxial_stress_modulus(G, K).equilibrium == 0.0
    assert uniaxial_stress_modulus(K, K).equilibrium == pytest.approx(9.0 / 4.0 * 1e-16, rel=1e-15)
    assert uniaxial_stress_modulus(K, G).equilibrium == 0.0


@pytest.mark.parametrize(("G", "K"), MATERIALS)
def test_poisson_ratio_agrees_with_a_numerical_inverse_laplace_transform(G, K):
    def ratio(s):
        shear, bulk = carson(G, s), carson(K, s)
        return (3 * bulk - 2 * shear) / (2 * (3 * bulk + shear))

    nu = poisson_ratio(G, K)
    for xi in (1e-3, 0.3, 20.0, 2e3):
        assert float(nu.at(xi)) == pytest.approx(stepped(ratio, xi), abs=4e-15)  # some ten roundings of numbers below 1


@given(material=materials())
def test_poisson_ratio_meets_its_limits(material):
    G, K = material
    nu = poisson_ratio(G, K)
    first = (3 * K.instantaneous - 2 * G.instantaneous) / (2 * (3 * K.instantaneous + G.instantaneous))
    last = (3 * K.equilibrium - 2 * G.equilibrium) / (2 * (3 * K.equilibrium + G.equilibrium))
    assert nu.instantaneous == pytest.approx(first, abs=1e-15)
    assert nu.long_term == pytest.approx(last, abs=1e-15)
    assert float(nu.at(0.0)) == pytest.approx(first, abs=1e-14)  # up to twelve amplitudes, some roundings each
    assert float(nu.at(math.inf)) == nu.long_term


def test_poisson_ratio_of_two_liquids_ends_at_the_ratio_of_their_viscosities():
    nu = poisson_ratio(MELT_SHEAR, MELT_BULK)
    G, K = 0.304, 3.59  # sums of modulus times time [1e9 Pa s], by hand
    assert nu.long_term == pytest.approx((3 * K - 2 * G) / (2 * (3 * K + G)), rel=1e-14)
    assert nu.times.size == 3


@pytest.mark.parametrize("count", [1, 4, 60])
@pytest.mark.parametrize("equilibrium", [0.0, 1.0e6])
def test_poisson_ratio_of_one_spectrum_is_constant(count, equilibrium):
    moduli = 10.0 ** np.random.default_rng(3).uniform(3.0, 9.0, count)
    G = PronySeries(equilibrium=equilibrium, moduli=moduli, times=np.logspace(-12.0, 12.0, count))
    nu = poisson_ratio(G, G.scaled(2.1666))
    assert nu.amplitudes.size == 0
    assert nu.instantaneous == pytest.approx(4.4998 / 14.9996, rel=1e-15)
    assert nu.long_term == pytest.approx(nu.instantaneous, rel=1e-14)


def test_poisson_ratio_may_fall_where_the_bulk_relaxes_more():
    nu = poisson_ratio(PronySeries.elastic(1.0), PronySeries(equilibrium=1.0, moduli=[2.0], times=[3.0]))
    assert nu.long_term < nu.instantaneous
    assert nu.amplitudes.tolist() == pytest.approx([7.0 / 20.0 - 1.0 / 8.0], rel=1e-14)
    assert nu.times.tolist() == pytest.approx([3.0 * 10.0 / 4.0], rel=1e-14)  # tau P_0/P_inf


def test_poisson_ratio_of_an_elastic_solid_is_a_number():
    nu = poisson_ratio(PronySeries.elastic(1.2), PronySeries.elastic(2.0))
    assert nu.at([0.0, 1.0]).tolist() == pytest.approx([0.25, 0.25], rel=1e-15)
    with pytest.raises(ParameterError, match="xi"):
        nu.at(-1.0)


@pytest.mark.parametrize("nu", [-0.4, 0.0, 0.36, 0.4999])
def test_young_with_constant_poisson_ratio_gives_both_moduli_its_fractions(nu):
    G, K = shear_and_bulk_of_young(SHEAR, nu=nu)
    for part in (G, K):
        assert part.times.tolist() == SHEAR.times.tolist()
        np.testing.assert_allclose(part.fractions, SHEAR.fractions, rtol=1e-15)
    ratio = poisson_ratio(G, K)
    assert ratio.amplitudes.size == 0
    assert ratio.instantaneous == pytest.approx(nu, abs=1e-15)


@pytest.mark.parametrize("young", [SHEAR, MELT_SHEAR, PronySeries.elastic(1e9)], ids=["solid", "liquid", "elastic"])
@pytest.mark.parametrize("bulk", [1.2e8, 3e8, 1e10])
@pytest.mark.parametrize("exponent", [-6.0, -1.0, 0.5, 3.0, 6.0])
def test_young_with_constant_bulk_modulus_obeys_the_elastic_relation(young, bulk, exponent):
    G, K = shear_and_bulk_of_young(young, K=bulk)
    assert (K.instantaneous, K.times.size) == (bulk, 0)
    with mpmath.workdps(40):
        s = mpmath.mpf(10) ** exponent
        E = carson(young, s)
        # 9K - E loses a factor 9K/(9K - E), up to 20 here, of some roundings
        assert float(carson(G, s) * (9 * bulk - E) / (3 * bulk * E)) == pytest.approx(1.0, abs=4e-14)


@pytest.mark.parametrize(
    ("assumption", "name"),
    [
        ({}, "assumption on the other modulus"),
        ({"nu": 0.3, "K": 1e9}, "assumption on the other modulus"),
        ({"nu": 0.5}, "nu"),
        ({"nu": -1.0}, "nu"),
        ({"K": 0.0}, "K"),
        ({"K": 1.12e8}, "K"),
    ],
)
def test_an_assumption_that_makes_no_material_is_refused(assumption, name):
    with pytest.raises(ParameterError) as caught:
        shear_and_bulk_of_young(SHEAR, **assumption)
    assert caught.value.name == name
