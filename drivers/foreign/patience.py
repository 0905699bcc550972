"""How long the harness waits for the process of a routine, and how it tells that the process has ended."""

from __future__ import annotations

import os
import select
import subprocess
import sys
import time
from pathlib import Path

from drivers.foreign.arena import Arena

__all__ = ["Patience", "has_ended"]

CROWDED = 20.0
"""How many times its limit a process may take that the machine does not let compute."""


def has_ended(process: subprocess.Popen[bytes]) -> bool:
    """Whether a process has ended; its number stays its own until it is waited for, so that its group can be killed by it."""
    if process.returncode is not None:
        return True
    if sys.platform != "linux":
        return process.poll() is not None
    try:
        return os.waitid(os.P_PID, process.pid, os.WEXITED | os.WNOWAIT | os.WNOHANG) is not None
    except ChildProcessError:
        return True


def _computing(pid: int) -> float | None:
    """Seconds that a process has computed, where it is ready to compute now; None where it waits, or cannot be asked."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text(encoding="ascii", errors="replace").rpartition(")")[2].split()
    except OSError:
        return None
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK") if fields[0] == "R" else None


class Patience:
    """Waits for a descriptor as long as the routine begins a new call within the limit, over and over.

    On a crowded machine a process may have to wait for its turn; one that is ready to compute, and has hardly been let, is given up to
    `CROWDED` times the limit.
    """

    def __init__(self, limit: float, arena: Arena | None, process: subprocess.Popen[bytes]) -> None:
        self._limit = limit
        self._arena = arena
        self._process = process
        self._slice = 1000.0 * min(1.0, max(0.001, limit / 8.0))  # ms
        self._renew()

    def _count(self) -> int:
        return 0 if self._arena is None else int(self._arena.head[0])

    def _renew(self) -> None:
        self._begun, self._since = self._count(), time.monotonic()
        self._computed: float | None = None

    def wait(self, descriptor: int, event: int) -> None:
        """Return once the descriptor is ready; `TimeoutError` where patience ends, `EOFError` where the process has ended by then."""
        poll = select.poll()
        poll.register(descriptor, event)
        while not poll.poll(self._slice):
            if self._count() != self._begun:
                self._renew()
                continue
            passed = time.monotonic() - self._since
            if self._computed is None:  # from the first slice on: what it computed before counts for nothing
                self._computed = _computing(self._process.pid)
            if passed > self._limit and not self._starved(passed):
                raise EOFError if has_ended(self._process) else TimeoutError

    def _starved(self, passed: float) -> bool:
        now = _computing(self._process.pid)
        if now is None or self._computed is None or passed > CROWDED * self._limit:
            return False
        return now - self._computed < 0.5 * self._limit
