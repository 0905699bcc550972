import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy.spatial.transform import Rotation

from matlib.material import Material
from matlib.recursion import RECURSIONS
from matlib.shift import SHIFT_RULES, NoShift
from matlib.tensors import rotation
from matlib.viscoelastic import LinearViscoelastic
from tests.points import march
from tests.strategies import COLD, HOT, decades, materials, simple_laws

each_recursion = pytest.mark.parametrize("recursion", RECURSIONS.values(), ids=RECURSIONS)
each_rule = pytest.mark.parametrize("rule", SHIFT_RULES.values(), ids=SHIFT_RULES)
temperatures = st.floats(COLD + 1e-9, HOT - 1e-9)
COUNT = 5  # increments of a history


@st.composite
def histories(draw):
    """Durations, temperatures and strains of order one of a path of increments; jumps among them."""
    durations = draw(st.lists(st.just(0.0) | decades(-4, 5), min_size=COUNT, max_size=COUNT))
    T = draw(st.lists(temperatures, min_size=COUNT + 1, max_size=COUNT + 1))
    strain = draw(arrays(np.float64, (COUNT + 1, 6), elements=st.floats(-1.0, 1.0)))
    strain[0] = 0.0
    return durations, T, strain


def assert_close(one, other, material, tolerance=1e-12):
    """Equal but for roundings, which are small against the stiffness where strains are of order one."""
    scale = 6.0 * (material.shear.instantaneous + material.bulk.instantaneous)
    np.testing.assert_allclose(one, other, rtol=0.0, atol=tolerance * scale)


@each_recursion
@settings(max_examples=25)
@given(material=materials(), history=histories(), other=arrays(np.float64, 6, elements=st.floats(-1.0, 1.0)))
def test_stresses_of_two_strain_histories_add(recursion, material, history, other):
    routine = LinearViscoelastic(material=material, recursion=recursion)
    durations, T, strain = history
    second = np.outer([0.0, 1.0, 0.5, -1.0, 2.0, 0.0], other)

    def stress(path):
        return march(routine, durations, T, path)[0]

    alone = stress(np.zeros(6))  # expansion under clamped strain is part of each
    both = stress(2.0 * strain - 3.0 * second)
    assert_close(both - alone, 2.0 * (stress(strain) - alone) - 3.0 * (stress(second) - alone), material, 1e-11)


@each_recursion
@each_rule
@settings(max_examples=8)
@given(material=materials(), history=histories(), T=temperatures)
def test_a_warmer_point_is_a_faster_clock_and_nothing_else(recursion, rule, material, history, T):
    durations, _, strain = history
    a_T = math.exp(float(material.shift.ln_shift(T)))
    warm = LinearViscoelastic(material=material, recursion=recursion, shift_rule=rule)
    at_reference = LinearViscoelastic(
        material=Material(shear=material.shear, bulk=material.bulk, shift=NoShift(), expansion=material.expansion),
        recursion=recursion,
        shift_rule=rule,
    )
    stress, _ = march(warm, durations, T, strain)
    shifted, _ = march(at_reference, np.array(durations) / a_T, T, strain)
    assert_close(stress, shifted, material)


@each_recursion
@settings(max_examples=15)
@given(material=materials(), history=histories(), factor=decades(-3, 3))
def test_slower_relaxation_in_as_much_more_time_is_the_same(recursion, material, history, factor):
    durations, T, strain = history
    slow = Material(
        shear=material.shear.slowed(factor),
        bulk=material.bulk.slowed(factor),
        shift=material.shift,
        expansion=material.expansion,
    )
    stress, _ = march(LinearViscoelastic(material=material, recursion=recursion), durations, T, strain)
    slowed, _ = march(LinearViscoelastic(material=slow, recursion=recursion), factor * np.array(durations), T, strain)
    assert_close(stress, slowed, material)


@settings(max_examples=60)
@given(
    material=materials(laws=simple_laws(COLD, HOT)),
    strain=arrays(np.float64, 6, elements=st.floats(-1.0, 1.0)),
    T=st.tuples(temperatures, temperatures),
    duration=decades(-4, 5),
    cuts=st.lists(st.floats(0.05, 0.95), min_size=1, max_size=4),
)
def test_an_increment_of_constant_strain_rate_in_reduced_time_may_be_cut_anywhere(material, strain, T, duration, cuts):
    # Without expansion: its strain is linear in time, not in reduced time, and would have to be cut finer.
    material = Material(shear=material.shear, bulk=material.bulk, shift=material.shift)
    routine = LinearViscoelastic(material=material)
    parts = np.concatenate([[0.0], np.sort(cuts), [1.0]])
    at = T[0] + (T[1] - T[0]) * parts
    durations = duration * np.diff(parts)
    xi = np.concatenate([[0.0], np.cumsum(routine.reduced_time(durations, at[:-1], at[1:]))])
    whole, _ = march(routine, [duration], T, [np.zeros(6), strain])
    pieces, _ = march(routine, durations, at, np.outer(xi / xi[-1], strain))
    # the ends of the pieces are rounded by 1e-13 K, where ln a_T changes by up to 5 a kelvin
    assert_close(pieces[-1], whole[-1], material, 1e-11)


@settings(max_examples=30)
@given(material=materials(), history=histories(), k=st.integers(0, COUNT))
def test_a_path_may_be_left_and_taken_up_again_from_its_memory(material, history, k):
    routine = LinearViscoelastic(material=material)
    durations, T, strain = history
    whole, end = march(routine, durations, T, strain)
    first, memory = march(routine, durations[:k], T[: k + 1], strain[: k + 1])
    second, again = march(routine, durations[k:], T[k:], strain[k:], memory)
    np.testing.assert_array_equal(np.concatenate([first, second]), whole)
    np.testing.assert_array_equal(again, end)


@each_recursion
@settings(max_examples=25)
@given(material=materials(), history=histories(), turn=st.integers(0, 2**31))
def test_a_rotated_strain_history_gives_the_rotated_stress(recursion, material, history, turn):
    routine = LinearViscoelastic(material=material, recursion=recursion)
    durations, T, strain = history
    Q = rotation(Rotation.random(random_state=turn).as_matrix())
    stress, _ = march(routine, durations, T, strain)
    rotated, _ = march(routine, durations, T, strain @ Q.T)
    assert_close(rotated, stress @ Q.T, material)


def work_terms(stress, strain):
    """Mean and end stress of each increment times its strain increment; stress is zero at the start."""
    steps = np.diff(strain, axis=0)
    before = np.concatenate([np.zeros((1, 6)), stress[:-1]])
    return np.sum(0.5 * (before + stress) * steps, axis=1), np.sum(stress * steps, axis=1)


@settings(max_examples=60)
@given(material=materials(), history=histories(), T=temperatures)
def test_no_energy_comes_out_of_a_closed_cycle_of_strain(material, history, T):
    # Work that a step takes, exactly non-negative over a closed cycle: with the end stress for backward Euler, since
    # h' . (h' (1 + r) - h) >= (|h'|^2 - |h|^2)/2; with the mean stress for the trapezoidal rule, since then
    # (h + h') . (h' - h + r (h + h')/2) >= |h'|^2 - |h|^2.
    durations, _, strain = history
    closed = np.concatenate([strain, np.zeros((1, 6))])
    scale = 36.0 * (material.shear.instantaneous + material.bulk.instantaneous) * COUNT
    for name, which in (("trapezoidal", 0), ("backward-euler", 1)):
        routine = LinearViscoelastic(material=material, recursion=RECURSIONS[name])
        stress, _ = march(routine, [*durations, 1.0], T, closed)
        assert math.fsum(work_terms(stress, closed)[which]) >= -1e-12 * scale


@settings(max_examples=15)
@given(material=materials(), history=histories(), T=temperatures)
def test_no_energy_comes_out_of_a_closed_cycle_finely_cut(material, history, T):
    # The exponential recursion is exact at the ends of pieces, however fine. With the mean stress a piece takes
    # (a + b)(a x + b y)/(4 G gain), x = 1 - gain and y = gain - decay, beyond what it stores; x - y = r^2/6 for small r,
    # so that it falls below zero by a part r^3 of the energy at the most; for large r dissipation outweighs it by far.
    durations, _, strain = history
    pieces = 64
    closed = np.concatenate([strain, np.zeros((1, 6))])
    fine = np.concatenate(
        [a + (b - a) * np.arange(pieces)[:, None] / pieces for a, b in itertools.pairwise(closed)] + [np.zeros((1, 6))]
    )
    routine = LinearViscoelastic(material=material)
    stress, _ = march(routine, np.repeat([*durations, 1.0], pieces) / pieces, T, fine)
    mean, _ = work_terms(stress, fine)
    assert math.fsum(mean) >= -1e-3 * float(np.abs(mean).sum())
