"""The process of a foreign routine: ``python -m drivers.foreign.worker REQUESTS REPLIES ARENA PARENT`` (three descriptors, a process id).

Started by `drivers.foreign.isolation`, and of no use by hand.
"""

from __future__ import annotations

import contextlib
import ctypes
import mmap
import os
import resource
import signal
import sys
from typing import Any

import numpy as np

from drivers.foreign import compiled, python
from drivers.foreign.arena import INCREMENT, Arena, LocalFailureError, increment_of
from drivers.foreign.framing import Frame, packed, read_from, receive, write_to
from drivers.foreign.local import FaultyRoutineError, LocalRoutine
from drivers.point import ControlError, take_stepwise
from matlib.arrays import FloatArray
from matlib.routine import Block

PR_SET_PDEATHSIG = 1  # prctl(2)


def _die_with(parent: int) -> None:
    """Ask the kernel to end this process with its parent; elsewhere the end of the requests does it."""
    if sys.platform == "linux":
        with contextlib.suppress(OSError, AttributeError):
            ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGKILL)
        if os.getppid() != parent:
            os._exit(1)


def _limit_memory(bytes_more: int) -> None:
    """So much address space more than this process has now; no core files."""
    with contextlib.suppress(OSError, ValueError):
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    used = 0
    with contextlib.suppress(OSError, ValueError), open("/proc/self/statm", encoding="ascii") as statm:
        used = int(statm.read().split()[0]) * resource.getpagesize()
    with contextlib.suppress(OSError, ValueError):
        resource.setrlimit(resource.RLIMIT_AS, (used + bytes_more, used + bytes_more))


def _arena(descriptor: int, memory_size: int) -> Arena:
    size = Arena.size(memory_size)
    os.ftruncate(descriptor, size)
    return Arena(memoryview(mmap.mmap(descriptor, size)), memory_size)


def _loaded(order: dict[str, Any], constants: FloatArray, arena: int) -> LocalRoutine:
    """The routine that the first message asks for."""
    _limit_memory(int(order["memory_limit"]))
    if "python" in order:
        routine, size = python.load(order["python"], order["folder"], constants.tolist())
        return python.PythonRoutine(routine, size, _arena(arena, size))
    function = compiled.load(order["library"], order["symbol"])
    size = int(order["n_memory"])
    return compiled.CompiledRoutine(function, constants, size, _arena(arena, size))


def _update(routine: LocalRoutine, numbers: FloatArray) -> list[FloatArray]:
    update = routine.update(increment_of(numbers[:INCREMENT]), numbers[INCREMENT:])
    return list(update)


def _run(routine: LocalRoutine, header: dict[str, Any], numbers: FloatArray) -> list[FloatArray]:
    n = int(header["n"])
    sizes = [n, n, n + 1, 6 * n, 6]
    time, duration, temperature, targets, strain, memory = np.split(numbers, np.cumsum(sizes))
    free = np.array(header["free"], dtype=np.bool_)
    block = Block(
        time=time,
        time_end=time + duration,
        duration=duration,
        temperature=temperature,
        targets=targets.reshape(n, 6),
        stress_controlled=free,
    )
    mixed = bool(free.any())
    response = take_stepwise(routine, block, strain, memory) if mixed else routine.take(block, strain, memory)
    return [response.stress, response.memory, *([response.strain] if mixed else [])]


def _answer(routine: LocalRoutine, header: dict[str, Any], numbers: FloatArray) -> bytes:
    try:
        task = header["task"]
        return packed({"done": True}, _update(routine, numbers) if task == "update" else _run(routine, header, numbers))
    except LocalFailureError as failure:
        return packed({"failed": failure.kind, "detail": failure.detail, "row": failure.row})
    except ControlError as error:
        return packed({"uncontrolled": True}, [np.array([error.time, error.residual])])


def serve(requests: int, replies: int, arena: int) -> None:
    """Load the routine that the first message asks for, then answer until the harness goes away."""
    read = read_from(requests)
    first: Frame = receive(read)
    try:
        routine = _loaded(*first, arena)
    except FaultyRoutineError as error:
        write_to(replies, packed({"faulty": error.key, "found": error.found, "expected": error.expected}))
        return
    write_to(replies, packed({"ready": True, "memory_size": routine.memory_size}))
    while True:
        write_to(replies, _answer(routine, *receive(read)))


def main(arguments: list[str]) -> int:
    """Serve until the harness goes away."""
    requests, replies, arena, parent = (int(argument) for argument in arguments)
    for descriptor in (requests, replies, arena):
        os.set_inheritable(descriptor, False)  # a routine may start processes of its own
    _die_with(parent)
    try:
        serve(requests, replies, arena)
    except EOFError:
        return 0
    except OSError:  # the harness has gone in the middle of a message, or the routine has closed our descriptors
        return 1
    return 0


if __name__ == "__main__":
    status = main(sys.argv[1:])
    os._exit(status)  # what a routine registered for the end of the process is not ours to wait for
