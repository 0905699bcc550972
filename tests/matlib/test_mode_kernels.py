"""Kernels of loading modes, against numerical inverse Laplace transforms and residues in 30 digits."""

from functools import cache

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.mode_kernels import DRIVEN, MECHANICAL, ONE, RESPONSES, THERMAL, ExpKernel, mode_response
from matlib.prony import CreepSeries, PronySeries
from tests.exact.kernels import Kernels, carson
from tests.exact.relations import STRAIN_DRIVEN, STRESS_DRIVEN
from tests.strategies import decades, prony_series

SHEAR = PronySeries(equilibrium=1.0e7, moduli=[4.0e8, 3.0e8, 2.0e8], times=[1e-2, 1.0, 4e3])
BULK = PronySeries(equilibrium=2.0e9, moduli=[5.0e8, 8.0e8], times=[0.5, 1e3])
MELT_SHEAR = PronySeries(equilibrium=0.0, moduli=[4.0e8, 3.0e8], times=[1e-2, 1.0])
MELT_BULK = PronySeries(equilibrium=0.0, moduli=[9.0e8, 5.0e8], times=[0.1, 7.0])
MATERIALS = [
    pytest.param(SHEAR, BULK, id="solid"),
    pytest.param(SHEAR, PronySeries.elastic(3e9), id="elastic bulk"),
    pytest.param(SHEAR, SHEAR.scaled(2.5), id="shear and bulk alike"),
    pytest.param(MELT_SHEAR, BULK, id="liquid in shear"),
    pytest.param(MELT_SHEAR, MELT_BULK, id="liquid in both"),
]
MODES = [(mode, by_stress) for mode in RESPONSES for by_stress in (False, True)]
CLAIM = 1e-13  # what the reference solution takes a kernel's value to be good for, as a part of its terms' magnitudes


def answers(G, K, mode, by_stress):
    """Kernels by quantity, component and input; the mechanical strain is the driven one less the thermal one."""
    response = mode_response(G, K, mode, stress_driven=by_stress)
    for quantity, components in (("strain", response.strain), ("stress", response.stress)):
        for component, terms in components.items():
            driven, thermal = ExpKernel(), ExpKernel()
            for name, kernel in terms:
                if name in (DRIVEN, MECHANICAL):
                    driven = driven + kernel
                if name in (THERMAL, MECHANICAL):
                    thermal = thermal + (kernel if name == THERMAL else -1.0 * kernel)
            yield (quantity, component), (driven, thermal)


def size(kernel, xi):
    """Sum of the magnitudes of all terms."""
    return abs(kernel.constant) + abs(kernel.slope) * xi + np.exp(-xi / kernel.times) @ np.abs(kernel.amplitudes)


def relations(mode, by_stress):
    return (STRESS_DRIVEN if by_stress else STRAIN_DRIVEN)[mode]


@pytest.mark.parametrize(("mode", "by_stress"), MODES)
@pytest.mark.parametrize(("G", "K"), MATERIALS)
def test_kernels_agree_with_a_numerical_inverse_laplace_transform(G, K, mode, by_stress):
    @cache
    def answer(relation, xi):
        with mp.workdps(40):
            return mp.invertlaplace(lambda s: relation(carson(G, s), carson(K, s)) / s, xi, method="talbot")

    for key, kernels in answers(G, K, mode, by_stress):
        for kernel, relation in zip(kernels, relations(mode, by_stress)[key], strict=True):
            for xi in (3e-2, 50.0):
                assert abs(kernel.at(np.array(xi)) - answer(relation, xi)) <= CLAIM * size(kernel, xi)


@settings(max_examples=12)  # each holds all modes and kinds of control
@given(
    G=prony_series(0, 4, (6, 9.5), (-4, 4)),
    ratio=st.floats(0.7, 50.0),
    K=prony_series(0, 3, (0, 0), (-4, 4)),
    melts=st.booleans(),
    exponent=st.floats(-6.0, 6.0),
)
def test_kernels_of_any_material_agree_with_residues_in_30_digits(G, ratio, K, melts, exponent):
    K = K.scaled(ratio * G.instantaneous)
    if melts and G.times.size:
        G = PronySeries(equilibrium=0.0, moduli=G.moduli, times=G.times)
    xi, exact = 10.0**exponent, Kernels(G, K)
    for mode, by_stress in MODES:
        for key, kernels in answers(G, K, mode, by_stress):
            for kernel, relation in zip(kernels, relations(mode, by_stress)[key], strict=True):
                constant, slope, pairs = exact.of(relation)
                truth = constant + slope * xi + mp.fsum(a * mp.exp(-xi / t) for a, t in pairs)
                assert abs(kernel.at(np.array(xi)) - truth) <= CLAIM * size(kernel, xi)


@pytest.mark.parametrize(("mode", "by_stress"), MODES)
@pytest.mark.parametrize(("G", "K"), MATERIALS)
def test_a_kernel_starts_with_the_instantaneous_and_ends_with_the_long_term_elastic_answer(G, K, mode, by_stress):
    for key, kernels in answers(G, K, mode, by_stress):
        for kernel, relation in zip(kernels, relations(mode, by_stress)[key], strict=True):
            at_once = float(relation(mp.mpf(G.instantaneous), mp.mpf(K.instantaneous)))
            assert float(kernel.at(np.array(0.0))) == pytest.approx(at_once, rel=0.0, abs=CLAIM * size(kernel, 0.0))
            if G.equilibrium > 0.0:
                late = float(relation(mp.mpf(G.equilibrium), mp.mpf(K.equilibrium)))
                assert kernel.slope == 0.0
                assert kernel.constant == pytest.approx(late, rel=0.0, abs=CLAIM * size(kernel, 0.0))


@pytest.mark.parametrize(("mode", "by_stress"), MODES)
def test_an_elastic_material_has_kernels_without_terms(mode, by_stress):
    G, K = PronySeries.elastic(1e9), PronySeries.elastic(3e9)
    for key, kernels in answers(G, K, mode, by_stress):
        for kernel, relation in zip(kernels, relations(mode, by_stress)[key], strict=True):
            assert kernel.times.size == 0
            assert kernel.slope == 0.0
            # a few operations on exact numbers
            assert kernel.constant == pytest.approx(float(relation(mp.mpf(1e9), mp.mpf(3e9))), rel=1e-14, abs=0.0)


@given(creep=st.tuples(decades(-10, -8), decades(-10, -8), decades(-3, 3), decades(-14, -10)))
def test_the_kernel_of_a_creep_series_is_its_compliance(creep):
    glassy, retarded, time, fluidity = creep
    series = CreepSeries(instantaneous_compliance=glassy, compliances=[retarded], times=[time], fluidity=fluidity)
    for xi in (0.0, time, 1e6 * time):
        truth = glassy + retarded * (1 - mp.exp(-mp.mpf(xi) / time)) + mp.mpf(fluidity) * xi
        # the retarded part is taken as a whole less what is left of it: an eps of all of it
        assert float(ExpKernel.of(series).at(np.array(xi))) == pytest.approx(
            float(truth), rel=1e-15, abs=1e-15 * retarded
        )


def test_a_liquid_of_elastic_bulk_flows_in_uniaxial_creep_against_three_shear_viscosities():
    response = mode_response(MELT_SHEAR, PronySeries.elastic(3e9), "uniaxial stress", stress_driven=True)
    slope = sum(kernel.slope for name, kernel in response.strain[0] if name == DRIVEN)
    assert slope == pytest.approx(1.0 / (3.0 * float(MELT_SHEAR.moduli @ MELT_SHEAR.times)), rel=1e-14)


def test_kernels_add_up_and_scale_as_functions_do():
    one = ExpKernel(constant=2.0, slope=0.5, amplitudes=np.array([3.0]), times=np.array([7.0]))
    other = ExpKernel(constant=-1.0, amplitudes=np.array([1.0, -4.0]), times=np.array([0.5, 7.0]))
    xi = np.array([0.0, 0.3, 20.0])
    combined = 2.0 * one - other * 3.0 + ONE
    expected = 2.0 * one.at(xi) - 3.0 * other.at(xi) + 1.0
    np.testing.assert_allclose(combined.at(xi), expected, rtol=1e-14)  # sums of a few doubles
    assert combined.at(xi).shape == xi.shape


def test_a_general_mask_has_no_kernels():
    with pytest.raises(KeyError):
        mode_response(SHEAR, BULK, "components", stress_driven=False)
