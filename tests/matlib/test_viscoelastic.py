import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy.integrate import solve_ivp

from matlib.errors import ParameterError, ShiftRangeError
from matlib.interconversion import creep_of
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.routine import Block, Increment
from matlib.shift import SHIFT_RULES, WLF, NoShift
from matlib.viscoelastic import LinearViscoelastic
from tests.points import isotropic, march, ramped, relaxed
from tests.strategies import COLD, HOT, decades, materials

SHEAR = np.array([0.0, 0.0, 0.0, 0.0, 0.0, 1.0])
temperatures = st.floats(COLD + 1e-9, HOT - 1e-9)
strains = arrays(np.float64, 6, elements=st.floats(-1.0, 1.0))


def stiffness(material):
    """What every stress of a strain of order one is small against: the scale of rounding."""
    return 6.0 * (material.shear.instantaneous + material.bulk.instantaneous)


def reduced(material, duration, T):
    return duration * math.exp(-float(material.shift.ln_shift(T)))


def assert_stress(found, closed, material, tolerance=1e-12):
    """Equal to rounding: a few dozen operations, an exponential of r to r eps, and ln a_T to 50 eps."""
    np.testing.assert_allclose(found, closed, rtol=0.0, atol=tolerance * stiffness(material))


@given(material=materials(), strain=strains, T=temperatures, pieces=st.lists(decades(-6, 6), max_size=5))
def test_a_step_of_strain_relaxes_by_the_modulus_however_time_is_cut(material, strain, T, pieces):
    routine = LinearViscoelastic(material=material)
    stress, _ = march(routine, [0.0, *pieces], T, [np.zeros(6)] + [strain] * (len(pieces) + 1))
    for k in range(len(pieces) + 1):
        xi = reduced(material, math.fsum(pieces[:k]), T)
        assert_stress(stress[k], isotropic(relaxed(material.shear, xi), relaxed(material.bulk, xi), strain), material)


@given(material=materials(), strain=strains, T=temperatures, rise=decades(-5, 5), dwell=decades(-5, 5))
def test_a_ramp_and_a_hold_are_exact_in_one_increment_each(material, strain, T, rise, dwell):
    stress, _ = march(LinearViscoelastic(material=material), [rise, dwell], T, [np.zeros(6), strain, strain])
    length = reduced(material, rise, T)
    for k, xi in enumerate((0.0, reduced(material, dwell, T))):
        G, K = (ramped(series, xi, length) for series in (material.shear, material.bulk))
        assert_stress(stress[k], isotropic(G, K, strain), material)


@given(material=materials(), strain=strains, T=st.tuples(temperatures, temperatures), hold=decades(-5, 5))
def test_a_jump_of_temperature_in_a_hold_is_thermal_strain_at_once_and_another_clock(material, strain, T, hold):
    stress, _ = march(
        LinearViscoelastic(material=material),
        [0.0, hold, 0.0, hold],
        [T[0], T[0], T[0], T[1], T[1]],
        [np.zeros(6), strain, strain, strain, strain],
    )
    first, second = (reduced(material, hold, temperature) for temperature in T)
    thermal = 3.0 * material.expansion * (T[1] - T[0])
    for k, (since_strain, since_jump) in enumerate([(first, 0.0), (first + second, second)], start=2):
        G, K = relaxed(material.shear, since_strain), relaxed(material.bulk, since_strain)
        closed = isotropic(G, K, strain) + isotropic(0.0, relaxed(material.bulk, since_jump), 0.0 * strain, thermal)
        assert_stress(stress[k], closed, material)
    if material.expansion == 0.0:
        assert_stress(stress[2], stress[1], material)


@given(material=materials(), T=st.tuples(temperatures, temperatures), duration=decades(-5, 5))
def test_a_strain_that_keeps_up_with_expansion_costs_no_stress(material, T, duration):
    free = material.expansion * (T[1] - T[0]) * np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
    stress, _ = march(LinearViscoelastic(material=material), [duration], T, [np.zeros(6), free])
    assert_stress(stress[0], np.zeros(6), material, 1e-16)  # rounding of a thermal strain of a hundredth at the most


def test_a_harmonic_strain_ends_in_storage_and_loss_to_second_order():
    shear = PronySeries(equilibrium=1e6, moduli=np.array([2e6, 3e6]), times=np.array([0.2, 3.0]))
    routine = LinearViscoelastic(material=Material(shear=shear, bulk=PronySeries.elastic(1e9), shift=NoShift()))
    x = np.array([0.2, 3.0])  # omega is 1 rad/s
    storage = 1e6 + float(np.array([2e6, 3e6]) @ (x**2 / (1.0 + x**2)))
    loss = float(np.array([2e6, 3e6]) @ (x / (1.0 + x**2)))
    errors = []
    for count in (50, 100):
        t = np.linspace(0.0, 12.0 * 2.0 * math.pi, 12 * count + 1)  # transients fall below exp(-25) = 1e-11
        stress, _ = march(routine, np.diff(t), 293.15, np.sin(t)[:, np.newaxis] * SHEAR)
        last = slice(-count, None)
        steady = 2.0 * (storage * np.sin(t[1:]) + loss * np.cos(t[1:]))
        errors.append(float(np.abs(stress[last, 5] - steady[last]).max()) / 12e6)
    assert math.log2(errors[0] / errors[1]) == pytest.approx(2.0, abs=0.1)
    assert errors[1] < 1e-3  # (2 pi/100)^2/12 of the strain is lost between the nodes of a sine


def test_creep_under_constant_shear_stress_is_the_creep_compliance_to_second_order(resin):
    routine = LinearViscoelastic(material=resin)
    creep, T = creep_of(resin.shear), 343.15
    errors = []
    for count in (200, 400):
        t = np.concatenate([[0.0, 0.0], np.geomspace(1e-4, 1e8, count)])
        n = t.size - 1
        block = Block(
            time=t[:-1],
            time_end=t[1:],
            duration=np.diff(t),
            temperature=np.full(n + 1, T),
            targets=np.broadcast_to(1e6 * SHEAR, (n, 6)).copy(),
            stress_controlled=np.ones(6, dtype=np.bool_),
        )
        response = routine.run(block, np.zeros(6), np.zeros(routine.memory_size))
        xi = np.array([reduced(resin, time, T) for time in t[1:]])
        terms = zip(creep.compliances.tolist(), creep.times.tolist(), strict=True)
        compliance = creep.instantaneous_compliance + sum(J * -np.expm1(-xi / rho) for J, rho in terms)
        np.testing.assert_allclose(response.stress, block.targets, atol=1e-9 * 1e6)
        errors.append(float(np.abs(response.strain[:, 5] / (0.5e6 * compliance) - 1.0).max()))
    assert math.log2(errors[0] / errors[1]) == pytest.approx(2.0, abs=0.1)
    assert errors[1] < 1e-2


def by_hand(name):
    """Decay and gain of a recursion as in the text books."""
    return {
        "exponential": (lambda r: math.exp(-r), lambda r: (1.0 - math.exp(-r)) / r),
        "midpoint": (lambda r: math.exp(-r), lambda r: math.exp(-r / 2.0)),
        "trapezoidal": (lambda r: (2.0 - r) / (2.0 + r), lambda r: 2.0 / (2.0 + r)),
        "backward-euler": (lambda r: 1.0 / (1.0 + r), lambda r: 1.0 / (1.0 + r)),
    }[name]


@pytest.mark.parametrize("recursion", RECURSIONS)
@pytest.mark.parametrize("rule", SHIFT_RULES)
def test_two_increments_of_every_recursion_and_shift_rule_worked_out_by_hand(recursion, rule):
    law = WLF(C1=10.0, C2=80.0, T_ref=340.0)
    shear = PronySeries(equilibrium=1e6, moduli=np.array([3e6]), times=np.array([2.0]))
    bulk = PronySeries(equilibrium=5e6, moduli=np.array([4e6]), times=np.array([7.0]))
    routine = LinearViscoelastic(
        material=Material(shear=shear, bulk=bulk, shift=law, expansion=1e-4),
        recursion=RECURSIONS[recursion],
        shift_rule=SHIFT_RULES[rule],
    )
    strain = np.array([[0.0] * 6, [0.01, 0.02, -0.01, 0.0, 0.03, 0.01], [0.02, 0.01, 0.0, 0.01, 0.0, 0.01]])
    T, dt = np.array([335.0, 340.0, 342.0]), 1.5
    stress, _ = march(routine, [dt, dt], T, strain)
    decay, gain = by_hand(recursion)
    h, p, theta = np.zeros(6), 0.0, 0.0
    for k in (0, 1):
        dxi = float(SHIFT_RULES[rule](law, dt, T[k], T[k + 1]))
        step = strain[k + 1] - strain[k]
        mechanical = step[:3].sum() - 3e-4 * (T[k + 1] - T[k])
        deviator = step - step[:3].sum() / 3.0 * np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
        h = decay(dxi / 2.0) * h + gain(dxi / 2.0) * 2.0 * 3e6 * deviator
        p = decay(dxi / 7.0) * p + gain(dxi / 7.0) * 4e6 * mechanical
        theta += mechanical
        total = strain[k + 1] - strain[k + 1][:3].sum() / 3.0 * np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
        closed = 2.0 * 1e6 * total + h + (5e6 * theta + p) * np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
        np.testing.assert_allclose(stress[k], closed, rtol=0.0, atol=1e-13 * 9e6)  # a few dozen roundings


@pytest.fixture(scope="module")
def ramp_and_wave():
    """Shear stress at the end of a wave of strain while the temperature rises, by the rate equations in real time."""
    law = WLF(C1=10.0, C2=80.0, T_ref=340.0)
    G, tau = np.array([3e6, 2e6]), np.array([0.3, 3.0])

    def rate(t, h):
        slow = 10.0 ** (-10.0 * (2.0 * t) / (80.0 + 2.0 * t))
        return -h / (tau * slow) + 2.0 * G * math.cos(t)

    solution = solve_ivp(rate, (0.0, 2.0), [0.0, 0.0], rtol=1e-12, atol=1e-3, method="LSODA")
    material = Material(
        shear=PronySeries(equilibrium=1e6, moduli=G, times=tau), bulk=PronySeries.elastic(1e9), shift=law
    )
    return material, 2.0 * 1e6 * math.sin(2.0) + float(solution.y[:, -1].sum())


@pytest.mark.parametrize("recursion", RECURSIONS)
@pytest.mark.parametrize("rule", SHIFT_RULES)
def test_every_recursion_and_shift_rule_converges_to_the_rate_equations_at_its_order(ramp_and_wave, recursion, rule):
    material, truth = ramp_and_wave
    routine = LinearViscoelastic(material=material, recursion=RECURSIONS[recursion], shift_rule=SHIFT_RULES[rule])
    errors = []
    for count in (100, 200):
        t = np.linspace(0.0, 2.0, count + 1)
        stress, _ = march(routine, np.diff(t), 340.0 + 2.0 * t, np.sin(t)[:, np.newaxis] * SHEAR)
        errors.append(abs(stress[-1, 5] - truth))
    order = 1 if rule in ("start", "end") else RECURSIONS[recursion].order
    assert math.log2(errors[0] / errors[1]) == pytest.approx(order, abs=0.1)


@pytest.mark.parametrize("recursion", RECURSIONS.values(), ids=RECURSIONS)
@settings(max_examples=25)
@given(material=materials(), T=st.tuples(temperatures, temperatures), duration=decades(-6, 6), data=st.data())
def test_the_tangent_is_the_derivative_of_the_stress(recursion, material, T, duration, data):
    routine = LinearViscoelastic(material=material, recursion=recursion)
    memory = data.draw(arrays(np.float64, routine.memory_size, elements=st.floats(-1.0, 1.0)))
    start, end = data.draw(strains), data.draw(strains)

    def update(strain):
        return routine.update(Increment(time=0.0, duration=duration, temperature=T, strain=(start, strain)), memory)

    # the stress is affine in the strain: central differences with steps of one are exact
    columns = [0.5 * (update(end + unit).stress - update(end - unit).stress) for unit in np.eye(6)]
    tangent = update(end).tangent
    assert_stress(np.transpose(columns), tangent, material)
    np.testing.assert_array_equal(tangent, tangent.T)


def test_an_increment_changes_nothing_that_it_is_given(resin):
    routine = LinearViscoelastic(material=resin)
    memory, start, end = np.full(routine.memory_size, 2.0), 0.5 * SHEAR, SHEAR.copy()
    for array in (memory, start, end):
        array.setflags(write=False)
    increment = Increment(time=0.0, duration=1.0, temperature=(300.0, 350.0), strain=(start, end))
    first, second = routine.update(increment, memory), routine.update(increment, memory)
    for one, two in zip(first, second, strict=True):
        np.testing.assert_array_equal(one, two)
    assert np.all(memory == 2.0)
    assert not np.shares_memory(first.memory, memory)


@pytest.mark.parametrize("recursion", RECURSIONS)
@pytest.mark.parametrize("rule", SHIFT_RULES)
def test_increments_from_1e_minus_12_to_1e30_seconds_stay_finite_without_a_numpy_error(resin, recursion, rule):
    routine = LinearViscoelastic(material=resin, recursion=RECURSIONS[recursion], shift_rule=SHIFT_RULES[rule])
    durations = [1e-12, 1.0, 1e30, 1e-12, 1e12, 0.0]
    T = [300.0, 310.0, 390.0, 390.0, 296.0, 390.0, 296.0]
    strain = np.outer([0.0, 1e-9, 0.01, 0.02, 0.02, -0.01, 0.01], [1.0, 0.5, -0.2, 0.1, 0.0, 2.0])
    with np.errstate(all="raise", under="ignore"):
        stress, memory = march(routine, durations, T, strain)
    assert np.isfinite(stress).all()
    assert np.isfinite(memory).all()


@pytest.mark.parametrize("recursion", ["exponential", "midpoint", "backward-euler"])
def test_after_a_very_long_increment_the_long_term_moduli_are_left(resin, recursion):
    routine = LinearViscoelastic(material=resin, recursion=RECURSIONS[recursion])
    strain = np.array([0.01, -0.02, 0.03, 0.04, 0.0, 0.01])
    with np.errstate(all="raise", under="ignore"):
        stress, _ = march(routine, [1.0, 1e30], 353.15, [np.zeros(6), strain, strain])
    assert_stress(stress[1], isotropic(resin.shear.equilibrium, resin.bulk.equilibrium, strain), resin, 1e-15)


def test_a_memory_of_another_material_is_refused(resin):
    routine = LinearViscoelastic(material=resin)
    assert routine.memory_size == 1 + 1 + 6 * 4
    with pytest.raises(ParameterError, match=r"`memory` must be of shape \(26,\) \(got \(25,\)\)"):
        march(routine, [1.0], 353.15, np.zeros(6), np.zeros(25))


@pytest.mark.parametrize("duration", [-1.0, math.nan, math.inf])
def test_a_duration_that_is_none_is_refused(resin, duration):
    with pytest.raises(ParameterError, match="`duration` must be finite and >= 0 s"):
        march(LinearViscoelastic(material=resin), [duration], 353.15, np.zeros(6))


def test_a_temperature_below_the_pole_is_refused(resin):
    with pytest.raises(ShiftRangeError, match="at or below the pole"):
        march(LinearViscoelastic(material=resin), [1.0], [353.15, 290.0], np.zeros(6))
