import os

import numpy as np
import pytest

from drivers.foreign.failure import RoutineFailureError
from tests.drivers.foreign.faults import ABORT, EXIT, KINDS, LOOP, SEGFAULT, SLEEP, block, workers

INJECTIONS = int(os.environ.get("CARDPROOF_INJECTIONS", "30"))
ZERO, MEMORY = np.zeros(6), np.zeros(3)


def test_the_harness_outlives_every_crash_and_hang_at_random(faulty):
    rng = np.random.default_rng(20)
    routine = faulty(time_limit=0.2 if INJECTIONS < 100 else 0.02)  # the machine of a long run has nothing else to do
    wrong = []
    for _ in range(INJECTIONS):
        n, mixed = int(rng.integers(1, 700)), bool(rng.random() < 0.3)
        n = min(n, 40) if mixed else n
        where, what = int(rng.integers(n)), int(rng.choice([SEGFAULT, ABORT, EXIT, LOOP, SLEEP]))
        with pytest.raises(RoutineFailureError) as info:
            routine.run(block(n, where, what, mixed=mixed), ZERO, MEMORY)
        failure = info.value
        if (failure.kind, failure.increment.time, failure.memory[0]) != (KINDS[what], where, where):
            wrong.append((what, where, failure))
        assert not workers()
    assert not wrong
    routine.run(block(5), ZERO, MEMORY)
    assert workers() == {routine.pid}
