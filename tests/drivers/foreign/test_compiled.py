import ctypes

import numpy as np
import pytest

from benchmarks.timing import interleaved
from drivers.foreign.arena import INCREMENT, Arena
from drivers.foreign.compiled import LOST, steps_of
from drivers.foreign.foreign import ForeignRoutine
from matlib.routine import Block, Increment
from matlib.tensors import mandel_from_strain, mandel_from_stress, strain_from_mandel
from tests.drivers.foreign.faults import block

COST_LIMIT = 3.0
"""What a call may cost at 1000 increments, in calls of the function itself."""


def steps(times, durations):
    increments = np.zeros((len(times), INCREMENT))
    increments[:, 0], increments[:, 1] = times, durations
    out = np.empty_like(increments)
    steps_of(increments, out)
    singly = np.concatenate([np.empty((0, INCREMENT)), *(np.empty((1, INCREMENT)) for _ in times)])
    for k in range(len(times)):
        steps_of(increments[k : k + 1], singly[k : k + 1])
    np.testing.assert_array_equal(singly, out)  # one increment alone is answered as one among many
    return out[:, :2]


def test_the_two_times_are_the_start_and_the_end():
    assert steps([0.0, 10.0, 3.0], [2.5, 0.25, 0.0]).tolist() == [[0.0, 2.5], [10.0, 10.25], [3.0, 3.0]]


def test_a_late_short_increment_keeps_its_duration():
    durations = np.geomspace(1e-9, 1e9, 400)
    for start in (1.0, 1e4 / 3.0, 1e9):
        both = steps(np.full(400, start), durations)
        lost = np.abs(both[:, 1] - both[:, 0] - durations) / durations
        assert lost.max() <= LOST
    assert steps([1e9], [1e-9]).tolist() == [[0.0, 1e-9]]


def test_the_c_structure_holds_engineering_shear_and_the_tangent_is_read_row_by_row(faulty):
    rng = np.random.default_rng(3)
    start, end = rng.normal(size=6), rng.normal(size=6)
    strain = (mandel_from_strain(start), mandel_from_strain(end))
    increment = Increment(time=7.0, duration=2.0, temperature=(300.0, 310.0), strain=strain)
    update = faulty(symbol="times", n_memory=2).update(increment, np.zeros(2))
    assert update.memory.tolist() == [7.0, 9.0]
    # the routine answers start + 10 end, component by component; one rounding each way
    np.testing.assert_allclose(update.stress, mandel_from_stress(start + 10.0 * end), rtol=1e-15, atol=1e-15)
    # d(stress) = tangent d(strain), both in named components
    change = rng.normal(size=6)
    named = np.arange(36.0).reshape(6, 6) @ strain_from_mandel(change)
    np.testing.assert_allclose(update.tangent @ change, mandel_from_stress(named), rtol=1e-13, atol=1e-12)


def test_an_increment_that_is_not_in_the_arena_is_none():
    arena = Arena(memoryview(bytearray(Arena.size(5))), 5)
    assert arena.row is None
    arena.head[0] = 1
    assert arena.row == 0
    arena.prepare(3)
    assert arena.row is None


@pytest.mark.parametrize("size", [0, 1, 5, 64, 100_000])
def test_an_arena_fits_into_its_size(size):
    arena = Arena(memoryview(bytearray(Arena.size(size))), size)
    arena.guard()
    arena.prepare(1)
    regions = (arena.given, arena.memory, arena.stress, arena.tangent)
    for region in regions:
        region.body[...] = 1.0
    assert all(
        region.complaint_of_gaps(0, len(region.body)) is None for region in regions
    )  # bodies and guards are apart
    assert Arena.size(size) <= max(2**23, 8 * 6 * size)


def test_many_blocks_and_single_updates_say_the_same(faulty):
    routine, n = faulty(), 700
    whole = block(n)
    response = routine.run(whole, np.zeros(6), np.zeros(3))
    strain, memory = np.zeros(6), np.zeros(3)
    for k in range(n):
        strain, before = whole.targets[k], strain
        increment = Increment(time=float(k), duration=1.0, temperature=(300.0, 300.0), strain=(before, strain))
        update = routine.update(increment, memory)
        memory = update.memory
        assert update.stress.tolist() == response.stress[k].tolist()
    assert memory.tolist() == response.memory.tolist()


def test_a_thousand_increments_cost_little_more_than_as_many_calls(examples, capsys):
    n, strain = 1000, np.zeros(6)
    with ForeignRoutine(examples / "c.routine.toml") as routine:
        memory = np.zeros(routine.memory_size)
        plain = block(n)
        warm = Block(
            time=plain.time, time_end=plain.time_end, duration=plain.duration, temperature=np.full(n + 1, 330.0),
            targets=plain.targets, stress_controlled=plain.stress_controlled,
        )  # fmt: skip
        constants = np.array(routine.described.constants)
        function = ctypes.CDLL(str(examples / "routine-c.so")).stress_update
        step = np.array([0.0, 1.0, 330.0, 330.0, *[0.0] * 6, 1e-5, *[0.0] * 5])
        arrays = [np.zeros(memory.size), np.zeros(memory.size), np.zeros(6), np.zeros(36)]
        pointers = [ctypes.c_void_p(a.ctypes.data) for a in (step, constants, *arrays)]
        counts = [ctypes.c_int(constants.size), ctypes.c_int(memory.size)]
        call = (pointers[0], counts[0], pointers[1], counts[1], *pointers[2:])

        def calls():
            for _ in range(n):
                function(*call)

        # in turn, so that whatever else the machine does meets both alike
        timings = interleaved({"isolated": lambda: routine.run(warm, strain, memory), "direct": calls}, 50)
    isolated, direct = timings["isolated"].least, timings["direct"].least
    with capsys.disabled():
        print(f"\n{1e6 * isolated / n:.2f} us an increment in a process of its own, {1e6 * direct / n:.2f} us a call, ratio "
              f"{isolated / direct:.2f}")  # fmt: skip
    assert isolated < COST_LIMIT * direct
