"""What is left of a routine's process when the process that drives it ends, one way or another."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from tests.drivers.foreign.faults import LOOP

SCRIPT = """
import os, sys
import numpy as np
from drivers.foreign.foreign import ForeignRoutine
from tests.drivers.foreign.faults import block

routine = ForeignRoutine("{file}")
print(routine.pid, flush=True)
how = "{how}"
if how == "forked":
    child = os.fork()
    if child == 0:
        sys.exit(0)  # what the child does at its end is none of the routine's business
    os.waitpid(child, 0)
    print(routine.update is not None and routine.pid, flush=True)
    sys.exit(0)
if how == "error":
    raise SystemExit("no close, no context")
if how == "exit":
    os._exit(0)
routine.run(block(5, 2, {what}), np.zeros(6), np.zeros(3))
"""


def gone(pid, patience=10.0):
    """Whether a process ends within some seconds."""
    until = time.monotonic() + patience
    while time.monotonic() < until:
        try:
            if Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] == "Z":
                return True
        except OSError:
            return True
        time.sleep(0.02)
    return False


@pytest.fixture
def harness(faulty_folder):
    """Starts a process that drives a routine; gives it, and the process id of the routine."""
    started = []

    def start(how):
        file = faulty_folder / f"{how}.routine.toml"
        file.write_text('library = "libfaulty.so"\nn_memory = 3\nconstants = [1.0, 0.0]\ntime_limit = 1000.0\n')
        script = SCRIPT.format(file=file, how=how, what=LOOP)
        root = Path(__file__).parents[3]
        process = subprocess.Popen(
            [sys.executable, "-c", script], stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True, cwd=root
        )
        started.append(process)
        return process, int(process.stdout.readline())

    yield start
    for process in started:
        process.kill()
        process.wait()
        process.stdout.close()


@pytest.mark.parametrize("how", ["error", "exit"])
def test_a_harness_that_ends_leaves_no_process(harness, how):
    process, pid = harness(how)
    process.wait(timeout=30)
    assert gone(pid)


@pytest.mark.skipif(sys.platform != "linux", reason="elsewhere a routine that hangs does not see its harness go")
@pytest.mark.parametrize("number", [signal.SIGKILL, signal.SIGTERM, signal.SIGINT])
def test_a_harness_that_is_killed_while_a_routine_hangs_leaves_no_process(harness, number):
    process, pid = harness("hang")
    time.sleep(0.3)
    os.kill(process.pid, number)
    process.wait(timeout=30)
    assert gone(pid)


def test_a_fork_of_the_harness_does_not_end_the_process_of_its_parent(harness):
    process, pid = harness("forked")
    assert process.stdout.readline().strip() == str(pid)
    process.wait(timeout=30)
    assert gone(pid)
