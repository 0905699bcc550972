"""The loop against closed forms of the textbooks, and a practice of the trade."""

import dataclasses
import math

import numpy as np
import pytest

from drivers.path import MODES, Path, Segment
from drivers.point import drive
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import VFT, WLF, Arrhenius, NoShift
from matlib.viscoelastic import LinearViscoelastic

# Standard linear solid with E_inf 1, E_1 2, tau 5 (J. D. Ferry, Viscoelastic Properties of Polymers; N. W. Tschoegl, The
# Phenomenological Theory of Linear Viscoelastic Behavior: textbook forms, figures are our own arithmetic from them).
# In simple shear, so that the modulus is G itself; the bulk modulus does not matter.
SOLID = Material(shear=PronySeries.from_long_term(1.0, [2.0], [5.0]), bulk=PronySeries.elastic(1.0), shift=NoShift())
ROOT2 = math.sqrt(2.0)  # Mandel form: a shear strain of 1 is sqrt(1/2), a shear stress of 1 is sqrt 2
PRINTED = 1e-14  # fifteen digits


def shear(*legs: tuple[str, float, float, bool], increments: int = 1) -> Path:
    """Simple shear at 300 K: (label, duration, end value, whether it is a stress)."""
    parts = []
    for label, duration, value, is_stress in legs:
        targets, controlled = np.zeros((1, 6)), np.zeros(6, dtype=bool)
        targets[0, 5], controlled[5] = value * (ROOT2 if is_stress else 1.0 / ROOT2), is_stress
        parts.append(
            Segment(
                label=label, durations=np.array([duration]), temperatures=None, targets=targets,
                stress_controlled=controlled, held=np.zeros(6, dtype=bool), increments=increments,
            )
        )  # fmt: skip
    return Path(name="p", mode=MODES["simple shear"], start_temperature=300.0, parts=tuple(parts))


@pytest.mark.parametrize("increments", [1, 7, 100])
def test_standard_linear_solid_ramp_then_hold(increments):
    """Ramp of 1 s at unit strain rate, then hold: stress at 1, 2 and 10 s."""
    path = shear(("ramp", 1.0, 1.0, False), ("hold", 1.0, 1.0, False), ("hold", 8.0, 1.0, False), increments=increments)
    h = drive(LinearViscoelastic(material=SOLID), path, keep="ends")
    assert h.time.tolist() == pytest.approx([0.0, 1.0, 2.0, 10.0], rel=1e-15)
    expected = [2.81269246922018, 2.48410707042343, 1.29963604984974]
    np.testing.assert_allclose(h.stress_components[1:, 5], expected, rtol=PRINTED)


def test_standard_linear_solid_step():
    """Relaxation at its own relaxation time, E(5) = 1 + 2/e."""
    path = shear(("step", 0.0, 1.0, False), ("hold", 5.0, 1.0, False), increments=10)
    h = drive(LinearViscoelastic(material=SOLID), path, keep="ends")
    np.testing.assert_allclose(h.stress_components[1:, 5], [3.0, 1.73575888234288], rtol=PRINTED)


def test_standard_linear_solid_creep():
    """Creep compliance 1 - (2/3) exp(-t/15): retardation time 15."""
    errors = []
    for n in (2000, 4000):
        path = shear(("load", 0.0, 1.0, True), ("creep", 30.0, 1.0, True), increments=n)
        h = drive(LinearViscoelastic(material=SOLID), path)
        np.testing.assert_allclose(h.strain_components[1, 5], 1.0 / 3.0, rtol=PRINTED)
        expected = 1.0 - 2.0 / 3.0 * np.exp(-h.time[1:] / 15.0)
        errors.append(np.abs(h.strain_components[1:, 5] - expected).max())
    # strain is taken straight over each increment, which it is not in creep: second order
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.02)
    assert errors[1] < 1e-6


@pytest.mark.parametrize("x", [0.01, 1.0, 10.0])
def test_ramp_time_error_of_one_maxwell_term(x):
    """Stress after a ramp of t1 over that after a step is (e^x - 1)/x with x = t1/tau, at every t >= t1."""
    tau = 5.0
    maxwell = dataclasses.replace(SOLID, shear=PronySeries(equilibrium=0.0, moduli=[2.0], times=[tau]))
    t1, routine = x * tau, LinearViscoelastic(material=maxwell)
    ramped = drive(routine, shear(("ramp", t1, 1.0, False), ("hold", 20.0, 1.0, False), increments=10))
    stepped = drive(
        routine, shear(("step", 0.0, 1.0, False), ("hold", t1, 1.0, False), ("hold", 20.0, 1.0, False), increments=10)
    )
    late = [-11, -6, -1]  # t1 and two later times
    ratio = ramped.stress_components[late, 5] / stepped.stress_components[late, 5]
    np.testing.assert_allclose(ratio, math.expm1(x) / x, rtol=1e-13)  # 20 increments of a few roundings


@pytest.mark.parametrize("T", [313.15, 333.15, 358.15])
def test_an_exactly_converted_card_gives_the_same_curve_in_a_constant_rate_pull(T):
    """Common practice, no source: an offset Arrhenius law is WLF with C2 = T_ref - T_inf and B = ln(10) C1 C2."""
    C1, C2, T_ref = 12.4, 131.0, 333.15
    wlf = Material(
        shear=PronySeries.from_fractions(0.9e9, [0.2, 0.3, 0.3], [1e-2, 1.0, 100.0]),
        bulk=PronySeries.from_fractions(3.1e9, [0.1], [1.0]),
        shift=WLF(C1=C1, C2=C2, T_ref=T_ref),
        expansion=6.8e-5,
    )
    offset = dataclasses.replace(wlf, shift=VFT(B=math.log(10.0) * C1 * C2, T_inf=T_ref - C2, T_ref=T_ref))
    # about 25 degC: C1 C2 and T_ref - C2 stand, and every relaxation time is multiplied by a_T(25 degC)
    T_new = 298.15
    moved_C2 = C2 + T_new - T_ref
    factor = 10.0 ** (-C1 * (T_new - T_ref) / moved_C2)
    moved = Material(
        shear=PronySeries(equilibrium=wlf.shear.equilibrium, moduli=wlf.shear.moduli, times=factor * wlf.shear.times),
        bulk=PronySeries(equilibrium=wlf.bulk.equilibrium, moduli=wlf.bulk.moduli, times=factor * wlf.bulk.times),
        shift=WLF(C1=C1 * C2 / moved_C2, C2=moved_C2, T_ref=T_new),
        expansion=6.8e-5,
    )
    pull = Segment(
        label="pull", durations=np.array([4.0]), temperatures=None, targets=np.array([[0.02, 0, 0, 0, 0, 0]]),
        stress_controlled=np.array([False, True, True, False, False, False]), held=np.zeros(6, dtype=bool), increments=80,
    )  # fmt: skip
    path = Path(name="pull", mode=MODES["uniaxial stress"], start_temperature=T, parts=(pull,))
    curve, *others = (drive(LinearViscoelastic(material=m), path) for m in (wlf, offset, moved))
    for other in others:
        # ln a_T of up to 8 is rounded to 1e-15 or so, and so is the stress, 80 increments long
        np.testing.assert_allclose(other.stress[:, 0], curve.stress[:, 0], rtol=1e-12)
        np.testing.assert_allclose(other.strain, curve.strain, rtol=0, atol=1e-14)


def test_the_plain_arrhenius_law_that_meets_wlf_at_two_temperatures_gives_another_curve():
    """Common practice, no source: plain Arrhenius has one constant fewer, so it cannot follow WLF between and beyond."""
    C1, C2, T_ref = 12.4, 131.0, 333.15
    T_other = 353.15
    energy = math.log(10.0) * C1 * 20.0 / (C2 + 20.0) / (1.0 / T_ref - 1.0 / T_other) * 8.314462618
    wlf = Material(
        shear=PronySeries.from_fractions(0.9e9, [0.2, 0.3, 0.3], [1e-2, 1.0, 100.0]),
        bulk=PronySeries.elastic(3.1e9),
        shift=WLF(C1=C1, C2=C2, T_ref=T_ref),
    )
    plain = dataclasses.replace(wlf, shift=Arrhenius(activation_energy=energy, T_ref=T_ref))

    def stress(material: Material, T: float) -> float:
        path = dataclasses.replace(shear(("pull", 4.0, 0.02, False), increments=40), start_temperature=T)
        return float(drive(LinearViscoelastic(material=material), path).stress_components[-1, 5])

    for T in (T_ref, T_other):
        assert stress(plain, T) == pytest.approx(stress(wlf, T), rel=1e-12)
    # 20 K below T_ref WLF says 12.4 * 20/111 = 2.23 decades, Arrhenius 1.85: the stiffness differs by per cents
    assert stress(plain, 313.15) < 0.97 * stress(wlf, 313.15)
