import dataclasses
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from matlib.errors import ParameterError, ShiftRangeError
from matlib.kernels import CHUNK
from matlib.material import Material
from matlib.packing import AS_GIVEN
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.routine import Block
from matlib.shift import SHIFT_RULES, NoShift
from matlib.viscoelastic import LinearViscoelastic
from tests.points import march
from tests.strategies import COLD, HOT, decades, materials

JIT = os.environ.get("NUMBA_DISABLE_JIT", "0") == "0"
temperatures = st.floats(COLD + 1e-9, HOT - 1e-9)


def block_of(durations, T, targets, stress_controlled):
    durations = np.array(durations, dtype=float)
    ends = np.cumsum(durations)
    return Block(
        time=np.concatenate([[0.0], ends[:-1]])[: ends.size],
        time_end=ends,
        duration=durations,
        temperature=np.array(T, dtype=float),
        targets=np.array(targets, dtype=float),
        stress_controlled=np.array(stress_controlled, dtype=np.bool_),
    )


@st.composite
def blocks(draw, stress_controlled=None):
    """A few increments and jumps; strains to a hundredth, stresses to 1 MPa."""
    mask = np.array(draw(st.lists(st.booleans(), min_size=6, max_size=6)) if stress_controlled is None else [False] * 6)
    n = draw(st.integers(1, 6))
    targets = draw(arrays(np.float64, (n, 6), elements=st.floats(-1.0, 1.0))) * np.where(mask, 1e6, 0.01)
    durations = draw(st.lists(st.just(0.0) | decades(-4, 5), min_size=n, max_size=n))
    T = draw(st.lists(temperatures, min_size=n + 1, max_size=n + 1))
    return block_of(durations, T, targets, mask)


def state(draw, routine):
    """A strain and a memory that a path may have left behind."""
    strain = draw(arrays(np.float64, 6, elements=st.floats(-0.01, 0.01)))
    memory = draw(arrays(np.float64, routine.memory_size, elements=st.floats(-1.0, 1.0)))
    memory[0] *= 0.01  # the volume strain
    memory[1:] *= 0.01 * routine.material.shear.instantaneous
    return strain, memory


def assert_equal_one_by_one(routine, block, strain, memory):
    """The strains of a block, taken one by one, give its stresses and its memory, and both follow their targets."""
    response = routine.run(block, strain, memory)
    stress, end = march(routine, block.duration, block.temperature, np.concatenate([[strain], response.strain]), memory)
    # roundings are small against the stiffness, times strains and what is remembered of them
    material = routine.material
    stiffness = 6.0 * (material.shear.instantaneous + material.bulk.instantaneous)
    extent = max(float(np.abs(response.strain).max()), float(np.abs(strain).max()), 0.01)
    np.testing.assert_allclose(response.stress, stress, rtol=0.0, atol=1e-13 * stiffness * extent)
    np.testing.assert_allclose(response.memory[1:], end[1:], rtol=0.0, atol=1e-13 * stiffness * extent)
    assert response.memory[0] == pytest.approx(end[0], abs=1e-13 * extent)
    free = block.stress_controlled
    np.testing.assert_array_equal(response.strain[:, ~free], block.targets[:, ~free])
    np.testing.assert_allclose(
        response.stress[:, free], block.targets[:, free], rtol=0.0, atol=1e-12 * stiffness * extent
    )


@pytest.mark.parametrize("recursion", RECURSIONS.values(), ids=RECURSIONS)
@settings(max_examples=40)
@given(material=materials(), block=blocks(stress_controlled=()), data=st.data())
def test_a_block_of_strains_is_its_increments_one_by_one(recursion, material, block, data):
    routine = LinearViscoelastic(material=material, recursion=recursion)
    assert_equal_one_by_one(routine, block, *state(data.draw, routine))


@pytest.mark.parametrize("recursion", RECURSIONS.values(), ids=RECURSIONS)
@settings(max_examples=60)
@given(material=materials(), block=blocks(), data=st.data())
def test_a_block_of_strains_and_stresses_is_its_increments_one_by_one(recursion, material, block, data):
    routine = LinearViscoelastic(material=material, recursion=recursion)
    assert_equal_one_by_one(routine, block, *state(data.draw, routine))


@pytest.mark.parametrize("mask", range(64))
def test_every_choice_of_components_that_follow_a_stress_is_solved(resin, mask):
    controlled = np.array([bool(mask >> c & 1) for c in range(6)])
    targets = np.outer([0.3, 1.0, -0.5], [1.0, 0.2, -0.4, 0.7, 0.1, -1.0]) * np.where(controlled, 1e6, 0.01)
    block = block_of([0.0, 10.0, 1e4], [340.0, 340.0, 350.0, 330.0], targets, controlled)
    routine = LinearViscoelastic(material=resin)
    assert_equal_one_by_one(routine, block, np.zeros(6), np.zeros(routine.memory_size))


@pytest.mark.parametrize("rule", SHIFT_RULES.values(), ids=SHIFT_RULES)
def test_a_block_keeps_the_clock_of_its_shift_rule(resin, rule):
    routine = LinearViscoelastic(material=resin, shift_rule=rule)
    targets = np.outer([0.3, 1.0, -0.5], [1.0, 0.2, -0.4, 0.7, 0.1, -1.0]) * 0.01
    block = block_of([1.0, 10.0, 100.0], [340.0, 345.0, 360.0, 330.0], targets, [False] * 6)
    assert_equal_one_by_one(routine, block, np.zeros(6), np.zeros(routine.memory_size))


def test_a_block_under_uniaxial_stress_is_elastic_at_once(resin):
    # E = 9 K G/(3 K + G) and nu = (3 K - 2 G)/(2 (3 K + G)) of the instantaneous moduli
    G, K = 1.1e9, 3.7e9
    E, nu = 9.0 * K * G / (3.0 * K + G), (3.0 * K - 2.0 * G) / (2.0 * (3.0 * K + G))
    routine = LinearViscoelastic(material=resin)
    block = block_of([0.0], [300.0, 300.0], [[0.01, 0.0, 0.0, 0.0, 0.0, 0.0]], [False] + [True] * 5)
    response = routine.run(block, np.zeros(6), np.zeros(routine.memory_size))
    np.testing.assert_allclose(response.strain[0], np.array([1.0, -nu, -nu, 0.0, 0.0, 0.0]) * 0.01, atol=1e-16)
    np.testing.assert_allclose(response.stress[0], [0.01 * E, 0.0, 0.0, 0.0, 0.0, 0.0], atol=1e-14 * E)


def test_a_free_point_that_is_heated_expands_and_stays_free(resin):
    routine = LinearViscoelastic(material=resin)
    block = block_of([100.0] * 4, [340.0, 360.0, 380.0, 350.0, 340.0], np.zeros((4, 6)), [True] * 6)
    response = routine.run(block, np.zeros(6), np.zeros(routine.memory_size))
    rise = np.array([20.0, 40.0, 10.0, 0.0])
    free = 6.2e-5 * np.outer(rise, [1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
    np.testing.assert_allclose(response.strain, free, rtol=0.0, atol=1e-16)  # rounding of a strain of 3e-3
    np.testing.assert_allclose(response.stress, np.zeros((4, 6)), atol=1e-16 * 6.0 * 4.8e9)


def test_a_block_changes_nothing_that_it_is_given(resin):
    routine = LinearViscoelastic(material=resin)
    strain, memory = np.full(6, 0.01), np.full(routine.memory_size, 0.5)
    block = block_of([1.0, 2.0], [340.0, 350.0, 345.0], np.full((2, 6), 0.02), [True, False] * 3)
    before = [block.duration.copy(), block.temperature.copy(), block.targets.copy(), block.stress_controlled.copy()]
    for array in (strain, memory, block.duration, block.temperature, block.targets, block.stress_controlled):
        array.setflags(write=False)
    first, second = routine.run(block, strain, memory), routine.run(block, strain, memory)
    for one, two in zip(first, second, strict=True):
        np.testing.assert_array_equal(one, two)
    assert np.all(strain == 0.01)
    assert np.all(memory == 0.5)
    after = [block.duration, block.temperature, block.targets, block.stress_controlled]
    assert all(np.array_equal(a, b) for a, b in zip(before, after, strict=True))


@pytest.mark.parametrize("recursion", RECURSIONS.values(), ids=RECURSIONS)
def test_a_block_stays_finite_from_1e_minus_12_to_1e30_seconds(resin, recursion):
    routine = LinearViscoelastic(material=resin, recursion=recursion)
    targets = np.outer([1.0, -1.0, 0.5, 0.2, 0.0], [1e6, 0.01, 1e6, 0.02, 1e6, 0.0])
    T = [300.0, 310.0, 390.0, 390.0, 296.0, 390.0]
    block = block_of([1e-12, 1e30, 1e-12, 1e12, 0.0], T, targets, [True, False, True, False, True, False])
    with np.errstate(all="raise", under="ignore"):
        response = routine.run(block, np.zeros(6), np.zeros(routine.memory_size))
    assert all(np.isfinite(part).all() for part in response)


def test_a_block_without_increments_leaves_all_as_it_was(resin):
    routine = LinearViscoelastic(material=resin)
    memory = np.full(routine.memory_size, 0.5)
    response = routine.run(block_of([], [300.0], np.empty((0, 6)), [True] * 6), np.zeros(6), memory)
    assert response.strain.shape == response.stress.shape == (0, 6)
    np.testing.assert_array_equal(response.memory, memory)


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("memory", {"memory": np.zeros(25)}),
        ("strain", {"strain": np.zeros(3)}),
        ("stress_controlled", {"stress_controlled": [True] * 5}),
        ("targets", {"targets": np.zeros((2, 6))}),
        ("temperature", {"T": [300.0]}),
    ],
)
def test_an_array_that_does_not_belong_to_the_block_is_refused_before_the_kernel_sees_it(resin, name, changes):
    routine = LinearViscoelastic(material=resin)
    given = {"T": [300.0, 300.0], "targets": np.zeros((1, 6)), "stress_controlled": [False] * 6}
    given |= {"strain": np.zeros(6), "memory": np.zeros(26)} | changes
    strain, memory = given.pop("strain"), given.pop("memory")
    with pytest.raises(ParameterError, match=f"`{name}` must be of shape"):
        routine.run(block_of([1.0], **given), strain, memory)


def test_times_and_temperatures_that_cannot_be_are_refused(resin):
    routine = LinearViscoelastic(material=resin)
    memory = np.zeros(routine.memory_size)
    for durations in ([-1.0], [np.nan], [np.inf]):
        with pytest.raises(ParameterError, match="finite and >= 0 s"):
            routine.run(block_of(durations, [350.0, 350.0], np.zeros((1, 6)), [False] * 6), np.zeros(6), memory)
    with pytest.raises(ShiftRangeError, match="at or below the pole"):
        routine.run(block_of([1.0], [350.0, 280.0], np.zeros((1, 6)), [False] * 6), np.zeros(6), memory)


@pytest.mark.parametrize("liquid", ["shear", "bulk"])
def test_a_liquid_follows_a_stress_however_long_the_increment(liquid):
    flows = PronySeries(equilibrium=0.0, moduli=np.array([1e6]), times=np.array([1.0]))
    parts = {"shear": PronySeries.elastic(1e6), "bulk": PronySeries.elastic(1e6)} | {liquid: flows}
    routine = LinearViscoelastic(material=Material(shift=NoShift(), **parts))
    block = block_of([1.0, 1e5], [300.0] * 3, np.full((2, 6), 10.0), [True] * 6)
    assert_equal_one_by_one(routine, block, np.zeros(6), np.zeros(routine.memory_size))


@pytest.mark.skipif(not JIT, reason="plain Python warns of the division")
def test_a_stress_that_nothing_resists_gives_no_number_that_could_be_mistaken_for_one():
    flows = PronySeries(equilibrium=0.0, moduli=np.array([1e6]), times=np.array([1.0]))
    material = Material(shear=flows, bulk=PronySeries.elastic(1e6), shift=NoShift())
    midpoint = LinearViscoelastic(material=material, recursion=RECURSIONS["midpoint"])
    block = block_of([1e5], [300.0] * 2, np.full((1, 6), 10.0), [True] * 6)
    assert not np.isfinite(midpoint.run(block, np.zeros(6), np.zeros(midpoint.memory_size)).strain).any()


def many_terms(count, *, bulk=2):
    """A solid of `count` shear terms over 12 decades."""
    rng = np.random.default_rng(count)
    shear = PronySeries.from_fractions(1e9, np.full(count, 0.9 / count), 10.0 ** rng.uniform(-6.0, 6.0, count))
    volume = PronySeries.from_fractions(3e9, np.full(bulk, 0.3 / bulk), 10.0 ** rng.uniform(-3.0, 3.0, bulk))
    return Material(shear=shear, bulk=volume, shift=NoShift(), expansion=1e-5)


def wandering(n, mask=(), seed=3):
    """Increments of lengths over eight decades; strains to a hundredth, stresses to 1 MPa."""
    rng = np.random.default_rng(seed)
    controlled = np.isin(np.arange(6), mask)
    targets = rng.uniform(-1.0, 1.0, (n, 6)) * np.where(controlled, 1e6, 0.01)
    return block_of(10.0 ** rng.uniform(-4.0, 4.0, n), rng.uniform(280.0, 320.0, n + 1), targets, controlled)


@pytest.mark.parametrize("mask", [(), (1, 2), (0, 3, 4)], ids=["strains", "uniaxial", "mixed"])
@pytest.mark.parametrize("terms", [1, 3, 4, 5, 31, 32, 33, 65])
def test_any_number_of_terms_is_carried(terms, mask):
    routine = LinearViscoelastic(material=many_terms(terms, bulk=terms))
    block = wandering(7, mask)
    assert_equal_one_by_one(routine, block, np.zeros(6), np.zeros(routine.memory_size))


@pytest.mark.parametrize("mask", [(), (1, 2)], ids=["strains", "uniaxial"])
@pytest.mark.parametrize("n", [1, 2, CHUNK - 1, CHUNK, CHUNK + 1, 2 * CHUNK + 3])
def test_any_number_of_increments_is_taken(n, mask):
    routine = LinearViscoelastic(material=many_terms(3))
    assert_equal_one_by_one(routine, wandering(n, mask), np.zeros(6), np.zeros(routine.memory_size))


@pytest.mark.parametrize("lengths", [[1.0], [1.0, 1.0, 2.0], [1.0, 2.0], [1.0, 2.0, 2.0, 1.0, 1.0, 1.0, 3.0]])
def test_increments_that_repeat_are_taken_as_any_others(lengths):
    routine = LinearViscoelastic(material=many_terms(3))
    block = wandering(2 * CHUNK + 1)
    durations = np.resize(lengths, block.duration.size)
    block = block_of(durations, np.full(durations.size + 1, 300.0), block.targets, [False] * 6)
    assert_equal_one_by_one(routine, block, np.zeros(6), np.zeros(routine.memory_size))


@pytest.mark.parametrize("mask", [(), (1, 2)], ids=["strains", "uniaxial"])
@pytest.mark.parametrize("name", RECURSIONS)
def test_a_recursion_without_a_compiled_form_takes_the_same_lane(name, mask):
    known = RECURSIONS[name]
    own = dataclasses.replace(known, name="own", form=AS_GIVEN)
    material, block = many_terms(35), wandering(CHUNK + 3, mask)
    compiled, plain = (LinearViscoelastic(material=material, recursion=recursion) for recursion in (known, own))
    memory = np.zeros(compiled.memory_size)
    one, other = compiled.run(block, np.zeros(6), memory), plain.run(block, np.zeros(6), memory)
    scale = float(np.abs(one.stress).max())
    # as many roundings of the largest stress as there are increments; strains follow stresses over the softest modulus
    np.testing.assert_allclose(other.stress, one.stress, rtol=0.0, atol=1e-13 * scale)
    np.testing.assert_allclose(other.strain, one.strain, rtol=0.0, atol=1e-12 * float(np.abs(one.strain).max()))


def test_a_stress_that_has_relaxed_away_is_none_and_no_denormal_number():
    series = PronySeries(equilibrium=1e9, moduli=[1e9], times=[1.0])
    routine = LinearViscoelastic(material=Material(shear=series, bulk=PronySeries.elastic(1e9), shift=NoShift()))
    n = 4000
    targets = np.zeros((n, 6))
    targets[:, 5] = 0.01
    durations = np.full(n, 0.3)
    durations[0] = 0.0
    response = routine.run(
        block_of(durations, np.full(n + 1, 300.0), targets, [False] * 6), np.zeros(6), np.zeros(routine.memory_size)
    )
    dwell = np.cumsum(durations)[:700]
    np.testing.assert_allclose(
        response.stress[:700, 5], 2.0 * series.relaxation(dwell) * 0.01, rtol=1e-13
    )  # to a relaxing stress of 1e-91 of the first, 700 roundings
    assert np.all(response.memory[1:] == 0.0)


@pytest.mark.skipif(not JIT, reason="plain Python warns of the number")
def test_what_is_not_a_number_stays_so():
    routine = LinearViscoelastic(material=many_terms(3))
    memory = np.zeros(routine.memory_size)
    memory[-1] = np.nan  # of the last component
    response = routine.run(wandering(CHUNK + 5), np.zeros(6), memory)
    assert np.isnan(response.stress[:, 5]).all()
    assert np.isfinite(response.stress[:, :5]).all()


def test_the_response_tells_the_clock_of_its_increments(resin):
    routine = LinearViscoelastic(material=resin)
    block = block_of([1.0, 10.0], [340.0, 345.0, 360.0], np.zeros((2, 6)), [False] * 6)
    response = routine.run(block, np.zeros(6), np.zeros(routine.memory_size))
    np.testing.assert_array_equal(
        response.reduced_time, routine.reduced_time(block.duration, block.temperature[:-1], block.temperature[1:])
    )


@pytest.mark.skipif(not JIT, reason="this is the plain run")
def test_the_kernel_is_right_as_plain_python_too():
    root = Path(__file__).parents[2]
    run = subprocess.run(
        [sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", str(Path(__file__).relative_to(root))],
        cwd=root,
        env=os.environ | {"NUMBA_DISABLE_JIT": "1"},
        capture_output=True,
        text=True,
        timeout=300,
    )
    assert run.returncode == 0, run.stdout
    assert "3 skipped" in run.stdout
