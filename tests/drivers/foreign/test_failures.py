import os
import time

import numpy as np
import pytest

from drivers.foreign.failure import RoutineFailureError
from drivers.point import ControlError
from matlib.errors import CardproofError, FileError, ParameterError
from matlib.routine import Increment
from tests.drivers.foreign.faults import (
    CHILD,
    GONE,
    KINDS,
    LOOP,
    PRINT,
    PYTHON_KINDS,
    SEGFAULT,
    STRAY,
    TOO_LARGE,
    block,
    group,
    workers,
)  # fmt: skip

ZERO, MEMORY = np.zeros(6), np.zeros(3)
N, WHERE = 600, 389  # in the second stretch of increments that a process takes in one go


def jump(e33=0.0):
    return Increment(time=2.0, duration=1.0, temperature=(300.0, 310.0), strain=(ZERO, np.array([0, 0, e33, 0, 0, 0])))


@pytest.mark.parametrize("what", KINDS)
def test_a_compiled_failure_is_named_with_the_increment_that_caused_it(faulty, what):
    routine = faulty()
    with pytest.raises(RoutineFailureError) as info:
        routine.run(block(N, WHERE, what), ZERO, MEMORY)
    failure = info.value
    assert failure.kind == KINDS[what]
    assert failure.increment.time == WHERE
    assert failure.increment.strain[1][2] == what
    assert failure.memory.tolist() == [WHERE, 0.0, 0.0]  # it counts the calls
    assert isinstance(failure, CardproofError)
    assert isinstance(failure, RuntimeError)
    assert f"{KINDS[what]} in the increment of 1 s that starts at {WHERE} s" in str(failure)


@pytest.mark.parametrize("what", [SEGFAULT, LOOP, 6, 7, 10, 13, 14])
def test_a_failure_under_mixed_control_is_named_with_its_increment(faulty, what):
    with pytest.raises(RoutineFailureError) as info:
        faulty().run(block(30, 17, what, mixed=True), ZERO, MEMORY)
    assert (info.value.kind, info.value.increment.time, info.value.memory[0]) == (KINDS[what], 17.0, 17.0)


@pytest.mark.parametrize("what", PYTHON_KINDS)
def test_a_failure_in_python_is_named_with_the_increment_that_caused_it(faulty, what):
    with pytest.raises(RoutineFailureError) as info:
        faulty(python="Faulty").run(block(20, 13, what), ZERO, MEMORY)
    assert (info.value.kind, info.value.increment.time) == (PYTHON_KINDS[what], 13.0)
    assert info.value.memory.tolist() == [13.0, 0.0, 0.0]


def test_an_exception_is_told_in_one_line_with_its_place(faulty):
    with pytest.raises(RoutineFailureError) as info:
        faulty(python="Faulty").update(jump(6.0), MEMORY)
    assert info.value.detail == "ValueError: no answer for this (faulty.py, line 23)"


def test_a_write_all_over_the_place_is_blamed_on_its_own_increment(faulty):
    with pytest.raises(RoutineFailureError) as info:
        faulty().run(block(N, WHERE, STRAY), ZERO, MEMORY)
    assert info.value.kind in ("out-of-bounds", "crash")  # depending on what lies there
    assert info.value.increment.time == WHERE


def test_a_number_that_is_not_finite_counts_before_the_crash_that_follows_from_it(faulty):
    two = block(N, WHERE, 7.0)
    two.targets[WHERE + 3, 2] = SEGFAULT
    with pytest.raises(RoutineFailureError) as info:
        faulty().run(two, ZERO, MEMORY)
    assert (info.value.kind, info.value.increment.time) == ("not-finite", float(WHERE))


def test_what_a_routine_never_wrote_is_said(faulty):
    with pytest.raises(RoutineFailureError, match=r"tangent\[0\] was never written"):
        faulty(symbol="no_tangent").update(jump(), MEMORY)


def test_a_routine_that_closes_every_descriptor_is_a_crash(faulty):
    with pytest.raises(RoutineFailureError) as info:
        faulty().update(jump(GONE), MEMORY)
    assert info.value.kind == "crash"


def test_memory_beyond_the_limit_is_refused_to_the_routine(faulty):
    with pytest.raises(RoutineFailureError) as info:  # 16 GiB: malloc gives NULL, and the routine does not look
        faulty(memory_limit=500.0).update(jump(TOO_LARGE), MEMORY)
    assert info.value.kind == "crash"


def test_a_routine_may_print(faulty, capfd):
    routine = faulty()
    assert routine.update(jump(PRINT), MEMORY).memory[0] == 1.0
    routine.close()
    assert capfd.readouterr() == ("", "hello\n")  # never among results


def test_after_a_failure_the_next_call_is_answered(faulty):
    routine = faulty()
    before = routine.pid
    with pytest.raises(RoutineFailureError):
        routine.update(jump(SEGFAULT), MEMORY)
    assert routine.pid is None
    assert routine.update(jump(), MEMORY).memory.tolist() == [1.0, 0.0, 0.0]
    assert routine.pid not in (None, before)


def test_one_process_serves_all_calls(faulty):
    routine = faulty()
    pids = set()
    for _ in range(3):
        routine.run(block(5), ZERO, MEMORY)
        routine.update(jump(), MEMORY)
        pids.add(routine.pid)
    assert len(pids) == 1


def test_a_process_that_dies_between_calls_is_replaced_unnoticed(faulty):
    routine = faulty()
    os.kill(routine.pid, 9)
    time.sleep(0.1)
    assert routine.update(jump(), MEMORY).memory[0] == 1.0


def test_the_time_limit_is_for_one_increment_not_for_a_block(faulty):
    routine = faulty(python="Faulty", time_limit=0.05)
    start = time.monotonic()
    response = routine.run(block(4096), ZERO, MEMORY)
    assert response.memory[0] == 4096.0
    assert time.monotonic() - start > 0.05  # the whole block took longer than one increment may


def test_closing_ends_the_process_and_all_that_it_started(faulty):
    routine = faulty()
    routine.update(jump(CHILD), MEMORY)
    leader = routine.pid
    assert len(group(leader)) == 2  # the process and a sleeping child
    routine.close()
    assert not group(leader)
    assert leader not in workers()


def test_a_routine_that_is_dropped_leaves_no_process(faulty_folder):
    from drivers.foreign.foreign import ForeignRoutine

    (faulty_folder / "dropped.routine.toml").write_text(
        'library = "libfaulty.so"\nn_memory = 3\nconstants = [1.0, 0.0]\n'
    )
    routine = ForeignRoutine(faulty_folder / "dropped.routine.toml")
    pid = routine.pid
    assert pid in workers()
    del routine
    assert pid not in workers()


def test_a_stress_that_the_tangent_does_not_lead_to_is_an_error_of_control(faulty):
    sheared = block(3, mixed=True)
    sheared.targets[:, 4:] = 1.0
    with pytest.raises(ControlError):
        faulty(symbol="times", n_memory=2).run(sheared, ZERO, np.zeros(2))


def test_input_that_is_not_finite_never_reaches_a_routine(faulty):
    routine = faulty()
    with pytest.raises(ParameterError, match="finite"):
        routine.update(jump(np.nan), MEMORY)
    with pytest.raises(ParameterError, match="finite"):
        routine.run(block(3, 1, np.inf), ZERO, MEMORY)
    with pytest.raises(ParameterError, match="memory_size is 3"):
        routine.update(jump(), np.zeros(4))


@pytest.mark.parametrize(
    ("keys", "text"),
    [
        ({"symbol": "nothing"}, "symbol: found 'nothing'"),
        ({"python": "nothing"}, "python: found AttributeError"),
        ({"python": "not_a_routine"}, "python: found TypeError"),
        ({"python": "Grows"}, "memory_size = 'three'"),
        ({"library": "faulty.py", "n_memory": 1}, "library: found"),
    ],
)
def test_a_routine_that_cannot_be_loaded_is_a_fault_of_its_file(faulty, keys, text):
    with pytest.raises(FileError) as info:
        faulty(**keys)
    assert text in str(info.value)
    assert not workers()


def test_an_object_that_is_made_already_is_used_as_it_is(faulty):
    assert faulty(python="made").update(jump(), MEMORY).memory[0] == 1.0
