"""Prony series against published values and textbook closed forms."""

import math

import numpy as np
import pytest
from scipy import integrate, optimize

from matlib.interconversion import creep_of
from matlib.prony import PronySeries

# S. W. Park and R. A. Schapery, Int. J. Solids Struct. 36, 1653 (1999): PMMA, moduli in MPa. From memory; not re-read.
PMMA = PronySeries(
    equilibrium=2.24,
    moduli=[194.0, 283.0, 554.0, 602.0, 388.0, 156.0, 41.0, 13.8, 3.68, 0.790, 0.960],
    times=[2e-2, 2e-1, 2e0, 2e1, 2e2, 2e3, 2e4, 2e5, 2e6, 2e7, 2e8],
)
# H. M. Laun, Rheol. Acta 17, 1 (1978): low-density polyethylene melt, moduli in Pa. From memory; not re-read.
LDPE = PronySeries(
    equilibrium=0.0,
    moduli=[1.00, 180.0, 1.89e3, 9.80e3, 2.67e4, 5.86e4, 9.48e4, 1.29e5],
    times=[1e3, 1e2, 1e1, 1.0, 0.1, 1e-2, 1e-3, 1e-4],
)
# Standard linear solid; closed forms of the textbooks (Ferry, Tschoegl).
SOLID = PronySeries(equilibrium=1.0, moduli=[2.0], times=[5.0])
PRINTED = 1e-6  # six digits are printed: half a unit of the sixth is at most 5e-6, here at most 2e-6 of the value


def test_pmma_creep_has_the_computed_limits():
    """Park and Schapery's PMMA (from memory); the compliances are our own arithmetic."""
    creep = creep_of(PMMA)
    assert creep.instantaneous_compliance == pytest.approx(4.46534e-4, rel=2 * PRINTED)
    assert creep.long_term_compliance == pytest.approx(1.0 / 2.24, rel=1e-14)


def test_pmma_creep_has_the_computed_retardation_times():
    """Park and Schapery's PMMA (from memory); the retardation times are our own arithmetic."""
    creep = creep_of(PMMA)
    np.testing.assert_allclose(creep.times[:4], [0.0218591, 0.231032, 2.85758, 38.0166], rtol=3 * PRINTED)
    assert creep.times.size == 11
    assert np.all(PMMA.times < creep.times)
    assert np.all(creep.times[:-1] < PMMA.times[1:])


def test_ldpe_melt_has_its_zero_shear_viscosity():
    """Laun's low-density polyethylene (from memory): the sum is our own arithmetic, about 5e4 Pa s is published."""
    assert LDPE.viscosity == pytest.approx(51063.7, rel=PRINTED)
    assert LDPE.viscosity == pytest.approx(5e4, rel=0.05)  # "about": one digit
    assert 1.0 / creep_of(LDPE).fluidity == pytest.approx(51063.7, rel=PRINTED)


def test_standard_linear_solid_relaxes_as_its_closed_form():
    """Textbook closed form (Ferry, Tschoegl): E(5) = 1 + 2/e."""
    assert float(SOLID.relaxation(5.0)) == pytest.approx(1.73575888234288, rel=1e-14)


def test_standard_linear_solid_has_its_storage_and_loss():
    """Textbook closed form (Ferry, Tschoegl), at omega tau = 1."""
    assert float(SOLID.storage(0.2)) == pytest.approx(2.0, rel=1e-15)
    assert float(SOLID.loss(0.2)) == pytest.approx(1.0, rel=1e-15)


def test_standard_linear_solid_has_its_largest_loss_tangent():
    """Textbook closed form (Ferry, Tschoegl): 1/sqrt(3) at omega = 1/(5 sqrt(3))."""

    def negative_tangent(log_omega):
        omega = math.exp(log_omega)
        return -float(SOLID.loss(omega) / SOLID.storage(omega))

    peak = optimize.minimize_scalar(negative_tangent, bounds=(-6.0, 2.0), method="bounded", options={"xatol": 1e-9})
    assert -peak.fun == pytest.approx(1.0 / math.sqrt(3.0), rel=1e-14)
    assert math.exp(peak.x) == pytest.approx(0.115470053837925, rel=1e-6)  # a flat top: half the digits at best


def test_standard_linear_solid_creeps_with_its_retardation_time():
    """Textbook closed form (Ferry, Tschoegl): tau E_0/E_inf = 15."""
    creep = creep_of(SOLID)
    assert creep.times.tolist() == pytest.approx([15.0], rel=1e-15)
    assert creep.compliances.tolist() == pytest.approx([2.0 / 3.0], rel=1e-15)


def ramped(series, t, t1):
    """Stress at `t` after a ramp at unit strain rate until `t1`, then hold: the hereditary integral by quadrature."""
    value, _ = integrate.quad(lambda s: float(series.relaxation(t - s)), 0.0, min(t, t1), epsabs=0.0, epsrel=1e-13)
    return value


@pytest.mark.parametrize(("t", "stress"), [(1.0, 2.81269246922018), (2.0, 2.48410707042343), (10.0, 1.29963604984974)])
def test_standard_linear_solid_answers_a_ramp_and_hold(t, stress):
    """Textbook closed form (Ferry, Tschoegl): unit strain rate for 1 s, then hold."""
    assert ramped(SOLID, t, 1.0) == pytest.approx(stress, rel=1e-13)


@pytest.mark.parametrize("t1", [0.01, 1.0, 20.0])
@pytest.mark.parametrize("later", [0.0, 3.0, 40.0])
def test_a_ramp_in_place_of_a_step_raises_a_maxwell_term_by_a_constant_factor(t1, later):
    """Textbook closed form (Ferry, Tschoegl): (exp(x) - 1)/x with x = t1/tau, whenever after the ramp."""
    term = PronySeries(equilibrium=0.0, moduli=[2.0], times=[5.0])
    x = t1 / 5.0
    ratio = ramped(term, t1 + later, t1) / t1 / float(term.relaxation(t1 + later))
    assert ratio == pytest.approx(math.expm1(x) / x, rel=1e-12)
