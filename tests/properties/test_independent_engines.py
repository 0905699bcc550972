"""The loop and the built-in routine against general-purpose engines that share nothing with them.

The observed orders of convergence are recorded as properties of the test report (`--junit-xml`), and shown by `-s`.
"""

import functools
import math

import numpy as np
import pytest
from scipy import integrate, signal

from drivers.path import MODES, Path, Segment
from drivers.point import drive
from matlib.arrays import FloatArray
from matlib.effective import uniaxial_stress_modulus
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.shift import WLF
from matlib.shift.reduced_time import SHIFT_RULES
from matlib.viscoelastic import LinearViscoelastic

# An invented resin. Moduli in Pa, times in s at T_ref, temperatures in K.
G_INF, G_I, G_TAU = 0.2e9, np.array([0.3e9, 0.4e9, 0.3e9]), np.array([0.5, 5.0, 60.0])
K_INF, K_I, K_TAU = 2.0e9, np.array([0.5e9, 0.7e9]), np.array([2.0, 20.0])
ALPHA, T_REF, C1, C2 = 6e-5, 353.15, 8.0, 90.0
SAMPLES = 16  # per segment, at which stresses are compared
# duration [s], and strain e11 and temperature [K] at the end; a thermal cycle that pulls, dwells and lets go
LEGS = ((20.0, 0.01, 363.15), (10.0, 0.01, 345.15), (25.0, -0.004, 358.15))
T_START = 348.15


def material(expansion: float = ALPHA) -> Material:
    return Material(
        shear=PronySeries(equilibrium=G_INF, moduli=G_I, times=G_TAU),
        bulk=PronySeries(equilibrium=K_INF, moduli=K_I, times=K_TAU),
        shift=WLF(C1=C1, C2=C2, T_ref=T_REF),
        expansion=expansion,
    )


def thermal_cycle(mode: str, increments: int) -> Path:
    """The legs above in one of the two uniaxial modes."""
    controlled = np.zeros(6, dtype=bool)
    controlled[list(MODES[mode].free)] = True

    def segment(k: int, duration: float, strain: float, T: float) -> Segment:
        return Segment(
            label=f"leg {k}",
            durations=np.array([duration]),
            temperatures=np.array([T]),
            targets=np.array([[strain, 0.0, 0.0, 0.0, 0.0, 0.0]]),
            stress_controlled=controlled,
            held=np.zeros(6, dtype=bool),
            increments=increments,
        )

    parts = tuple(segment(k, *leg) for k, leg in enumerate(LEGS, start=1))
    return Path(name="thermal cycle", mode=MODES[mode], start_temperature=T_START, parts=parts)


def rates(t: float, y: FloatArray, de: float, T0: float, dT: float, free: bool) -> FloatArray:
    """Rates of the internal variables in real time: three normal strains, h of each shear term, p of each bulk term."""
    T = T0 + dT * t
    a = 10.0 ** (-C1 * (T - T_REF) / (C2 + T - T_REF))
    h, p = y[4 : 4 + 3 * G_TAU.size].reshape(3, -1), y[4 + 3 * G_TAU.size :]
    # stress rate = C0 (strain rate) + relaxing, by Hooke's law with the instantaneous moduli
    relaxing = -(h / (G_TAU * a)).sum(axis=1) - (p / (K_TAU * a)).sum() - 3.0 * ALPHA * dT * (K_INF + K_I.sum())
    G0, K0 = G_INF + G_I.sum(), K_INF + K_I.sum()
    C0 = 2.0 * G0 * np.eye(3) + (K0 - 2.0 * G0 / 3.0) * np.ones((3, 3))
    strain = np.array([de, 0.0, 0.0])
    if free:  # sides without stress: a linear system for their two strain rates
        strain[1:] = np.linalg.solve(C0[1:, 1:], -relaxing[1:] - C0[1:, 0] * de)
    theta = strain.sum() - 3.0 * ALPHA * dT
    deviator = strain - strain.sum() / 3.0
    dh = -h / (G_TAU * a) + 2.0 * np.outer(deviator, G_I)
    dp = -p / (K_TAU * a) + K_I * theta
    return np.concatenate([strain, [theta], dh.ravel(), dp])


@functools.cache
def by_initial_value_solver(free: bool) -> FloatArray:
    """Normal stresses at the samples of every leg [Pa], by an explicit Runge-Kutta method of order 8."""
    y = np.zeros(4 + 3 * G_TAU.size + K_TAU.size)
    rows, e, T = [], 0.0, T_START
    for duration, e_end, T_end in LEGS:
        arguments = ((e_end - e) / duration, T, (T_end - T) / duration, free)
        solution = integrate.solve_ivp(
            rates, (0.0, duration), y, method="DOP853", rtol=1e-11, atol=1e-16 * G_INF, args=arguments,
            t_eval=duration * np.arange(1, SAMPLES + 1) / SAMPLES,
        )  # fmt: skip
        assert solution.success
        strain, theta = solution.y[:3], solution.y[3]
        h = solution.y[4 : 4 + 3 * G_TAU.size].reshape(3, G_TAU.size, -1).sum(axis=1)
        p = solution.y[4 + 3 * G_TAU.size :].sum(axis=0)
        rows.append((2.0 * G_INF * (strain - strain.mean(axis=0)) + h + K_INF * theta + p).T)
        y, e, T = solution.y[:, -1], e_end, T_end
    return np.concatenate(rows)


def errors(mode: str, counts: list[int], recursion: str = "exponential", rule: str = "integrated") -> FloatArray:
    """Largest error of a normal stress at the samples, of the peak, for each number of increments of a leg."""
    routine = LinearViscoelastic(material=material(), recursion=RECURSIONS[recursion], shift_rule=SHIFT_RULES[rule])
    expected = by_initial_value_solver(mode == "uniaxial stress")
    found = []
    for count in counts:
        h = drive(routine, thermal_cycle(mode, count))
        rows = np.arange(1, 3 * SAMPLES + 1) * (count // SAMPLES)
        found.append(float(np.abs(h.stress[rows, :3] - expected).max() / np.abs(expected).max()))
    return np.array(found)


def note(record_property, what: str, counts: list[int], found: FloatArray) -> FloatArray:
    """Order of convergence between each number of increments and the next, recorded and shown with the errors."""
    orders = np.log(found[:-1] / found[1:]) / np.log(np.divide(counts[1:], counts[:-1]))
    text = ", ".join(f"{n}: {e:.3g}" for n, e in zip(counts, found, strict=True))
    text = f"errors {text}; orders {', '.join(f'{order:.3f}' for order in orders)}"
    record_property(what, text)
    print(f"\n{what}: {text}")
    return orders


@pytest.mark.parametrize("mode", ["uniaxial strain", "uniaxial stress"])
def test_a_thermal_cycle_converges_with_order_two_to_an_initial_value_solver(mode, record_property):
    counts = [64, 128, 256, 512, 1024]
    found = errors(mode, counts)
    np.testing.assert_allclose(note(record_property, mode, counts, found), 2.0, atol=0.1)
    assert found[-1] < 2e-6


def test_the_sides_of_the_initial_value_problem_are_free_of_stress():
    stress = by_initial_value_solver(True)
    assert np.abs(stress[:, 1:]).max() < 1e-9 * np.abs(stress).max()  # the solver's tolerance, accumulated


@pytest.mark.parametrize(
    ("recursion", "order"), [("exponential", 2), ("midpoint", 2), ("trapezoidal", 2), ("backward-euler", 1)]
)
def test_each_recursion_converges_with_its_order(recursion, order, record_property):
    # r = dxi/tau of the fastest term is at most 0.3 at 1024 increments of a leg
    counts = [1024, 2048, 4096, 8192]
    orders = note(record_property, recursion, counts, errors("uniaxial strain", counts, recursion=recursion))
    np.testing.assert_allclose(orders, order, atol=0.1)
    assert RECURSIONS[recursion].order == order


@pytest.mark.parametrize(
    ("rule", "order"), [("start", 1), ("end", 1), ("middle", 2), ("mean-rate", 2), ("mean-log", 2), ("integrated", 2)]
)
def test_each_shift_rule_converges_with_its_order(rule, order, record_property):
    counts = [256, 512, 1024, 2048]
    orders = note(record_property, rule, counts, errors("uniaxial strain", counts, rule=rule))
    np.testing.assert_allclose(orders, order, atol=0.1)


@pytest.mark.parametrize("rule", ["start", "end", "middle", "mean-rate", "mean-log", "integrated"])
def test_a_held_strain_relaxes_by_the_reduced_time_of_quadrature(rule, record_property):
    """Strain held, temperature on a straight ramp, no expansion: nothing errs but the reduced time."""
    step, ramp = (
        Segment(
            label=label,
            durations=np.array([duration]),
            temperatures=np.array([T]),
            targets=np.array([[0.01, 0.0, 0.0, 0.0, 0.0, 0.0]]),
            stress_controlled=np.zeros(6, dtype=bool),
            held=np.zeros(6, dtype=bool),
            increments=64,
        )
        for label, duration, T in (("step", 0.0, 345.15), ("ramp", 30.0, 361.15))
    )
    path = Path(name="p", mode=MODES["uniaxial strain"], start_temperature=345.15, parts=(step, ramp))

    def rate(t: float) -> float:
        T = 345.15 + 16.0 * t / 30.0
        return float(10.0 ** (C1 * (T - T_REF) / (C2 + T - T_REF)))

    xi, bound = integrate.quad(rate, 0.0, 30.0, epsrel=1e-13, epsabs=0.0)
    assert bound < 1e-12 * xi
    G = G_INF + G_I @ np.exp(-xi / G_TAU)
    K = K_INF + K_I @ np.exp(-xi / K_TAU)
    expected = (K + 4.0 / 3.0 * G) * 0.01
    routine = LinearViscoelastic(material=material(expansion=0.0), shift_rule=SHIFT_RULES[rule])
    counts = [64, 128, 256, 512]
    found = np.array([abs(drive(routine, path.with_increments(n)).stress[-1, 0] / expected - 1.0) for n in counts])
    if rule == "integrated":
        assert np.all(found < 1e-13)  # exact: rounding of up to 512 increments
        return
    orders = note(record_property, f"held, {rule}", counts, found)
    np.testing.assert_allclose(orders, 1 if rule in ("start", "end") else 2, atol=0.1)


def by_filter(series: PronySeries, scale: float, strain: FloatArray, dt: float) -> FloatArray:
    """Stress of a strain history by digital filters that hold straight between samples (first-order hold)."""
    stress = scale * series.equilibrium * strain
    for modulus, tau in zip(series.moduli, series.times, strict=True):
        # one Maxwell element: dx/dt = (strain - x)/tau, stress = M (strain - x)
        A, B, C, D, _ = signal.cont2discrete(
            (np.array([[-1.0 / tau]]), np.array([[1.0 / tau]]), np.array([[-1.0]]), np.array([[1.0]])), dt, method="foh"
        )
        b, a = signal.ss2tf(A, B, C, D)
        stress = stress + scale * modulus * signal.lfilter(b[0], a, strain)
    return stress


def test_uniform_isothermal_increments_are_digital_filters_with_a_first_order_hold():
    n, dt, m = 3000, 0.02, material()
    strain = 0.01 * np.cumsum(np.random.default_rng(3).uniform(-1.0, 1.0, n)) / math.sqrt(n)  # starts at once
    targets = np.zeros((n, 6))
    targets[:, 0] = strain
    segment = Segment(
        label="walk", durations=np.full(n, dt), temperatures=None, targets=targets,
        stress_controlled=np.zeros(6, dtype=bool), held=np.zeros(6, dtype=bool), increments=1,
    )  # fmt: skip
    path = Path(name="walk", mode=MODES["uniaxial strain"], start_temperature=T_REF, parts=(segment,))
    h = drive(LinearViscoelastic(material=m), path)
    whole = np.concatenate([[0.0], strain])
    shear, bulk = by_filter(m.shear, 2.0, whole, dt), by_filter(m.bulk, 1.0, whole, dt)
    peak = h.peak_stress
    # a filter coefficient 1 - 1e-4 carries its rounding for 1e4 samples: 1e-16 * 1e4
    np.testing.assert_allclose(h.stress[:, 0], bulk + 2.0 / 3.0 * shear, rtol=0, atol=1e-12 * peak)
    np.testing.assert_allclose(h.stress[:, 1], bulk - 1.0 / 3.0 * shear, rtol=0, atol=1e-12 * peak)


def test_uniaxial_stress_at_one_temperature_converges_to_its_effective_modulus(record_property):
    """Pull, hold, let go: piecewise straight strain, so that the hereditary integral has a closed form."""
    m = material()
    young = uniaxial_stress_modulus(m.shear, m.bulk)
    corners = ((10.0, 0.01), (10.0, 0.01), (5.0, 0.0))

    def integral(t: float) -> float:
        """Stress: of each straight piece, strain rate times the integral of the modulus (textbook)."""
        total, start, e = 0.0, 0.0, 0.0
        for duration, e_end in corners:
            end = min(start + duration, t)
            if end > start:
                decay = np.exp(-(t - end) / young.times) - np.exp(-(t - start) / young.times)
                rate = (e_end - e) / duration
                total += rate * (young.equilibrium * (end - start) + float(young.moduli @ (young.times * decay)))
            start, e = start + duration, e_end
        return total

    controlled = np.array([False, True, True, False, False, False])
    segments = tuple(
        Segment(
            label=f"piece {k}", durations=np.array([duration]), temperatures=None,
            targets=np.array([[e, 0.0, 0.0, 0.0, 0.0, 0.0]]), stress_controlled=controlled, held=np.zeros(6, dtype=bool),
            increments=SAMPLES,
        )
        for k, (duration, e) in enumerate(corners)
    )  # fmt: skip
    path = Path(name="p", mode=MODES["uniaxial stress"], start_temperature=T_REF, parts=segments)
    times = np.concatenate(
        [[0.0], *(k * 10.0 + d * np.arange(1, SAMPLES + 1) / SAMPLES for k, (d, _) in enumerate(corners))]
    )
    expected = np.array([integral(t) for t in times])
    counts, found = [128, 512, 2048, 8192, 32768], []
    for n in counts:
        h = drive(LinearViscoelastic(material=m), path.with_increments(n), keep=n // SAMPLES)
        np.testing.assert_allclose(h.time, times, rtol=1e-12)
        found.append(float(np.abs(h.stress[:, 0] - expected).max() / np.abs(expected).max()))
    orders = note(record_property, "effective modulus", counts, np.array(found))
    np.testing.assert_allclose(orders, 2.0, atol=0.1)
    assert found[-1] < 1e-8
