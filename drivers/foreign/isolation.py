"""A process of its own for a foreign routine: bounded in time and memory, replaced after a failure, never left behind."""

from __future__ import annotations

import contextlib
import mmap
import os
import select
import signal
import subprocess
import sys
import tempfile
import time
import weakref
from pathlib import Path
from typing import Any

from drivers.foreign.arena import Arena
from drivers.foreign.framing import BrokenFrameError, Frame, packed, receive
from drivers.foreign.patience import Patience, has_ended
from matlib.arrays import FloatArray

__all__ = ["Isolated", "LostProcessError"]

START_LIMIT = 60.0
"""Seconds for a process to start, and to load its routine."""

DYING = 2.0
"""Seconds that a process may take to end after it has closed its side."""

_WORKER = "drivers.foreign.worker"
_ROOT = Path(__file__).parents[2]


class LostProcessError(Exception):
    """The process of a routine crashed or hung, and has been ended: kind and what happened."""

    def __init__(self, kind: str, detail: str) -> None:
        super().__init__(kind, detail)
        self.kind = kind
        self.detail = detail


def _environment() -> dict[str, str]:
    """Where the worker finds this package; one thread for linear algebra, which it hardly needs."""
    environment = dict(os.environ)
    environment.setdefault("OPENBLAS_NUM_THREADS", "1")
    if _ROOT.name not in ("site-packages", "dist-packages"):
        paths = [str(_ROOT), *filter(None, [environment.get("PYTHONPATH", "")])]
        environment["PYTHONPATH"] = os.pathsep.join(paths)
    return environment


def _shared_file() -> int:
    """An empty file without a name."""
    if sys.platform == "linux":
        return os.memfd_create("cardproof", os.MFD_CLOEXEC)
    with tempfile.TemporaryFile() as file:
        return os.dup(file.fileno())


def _end(process: subprocess.Popen[bytes], descriptors: tuple[int, ...], owner: int) -> None:
    """Kill a process and all that it started in its group; close what belongs to it. A fork of the owner leaves it alive."""
    if os.getpid() == owner:
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.killpg(process.pid, signal.SIGKILL)
        process.wait()
    for descriptor in descriptors:
        with contextlib.suppress(OSError):
            os.close(descriptor)


class Isolated:
    """One process; start it, ask it, end it.

    Parameters
    ----------
    order : dict
        The first message: what to load.
    constants : ndarray
    time_limit : float
        Seconds for one call of the routine.

    Attributes
    ----------
    reply : Frame
        What the process answered to the first message.

    Raises
    ------
    LostProcessError
        If it crashes or hangs while it loads.
    """

    def __init__(self, order: dict[str, Any], constants: FloatArray, time_limit: float) -> None:
        self._time_limit = time_limit
        self.arena: Arena | None = None
        request_end, self._requests = os.pipe()
        self._replies, reply_end = os.pipe()
        self._shared = _shared_file()
        theirs = (request_end, reply_end, self._shared)
        try:
            self._process = subprocess.Popen(
                [sys.executable, "-P", "-m", _WORKER, *map(str, theirs), str(os.getpid())],
                stdin=subprocess.DEVNULL,
                stdout=2,  # what a routine prints must not get among our results
                pass_fds=theirs,
                env=_environment(),
                start_new_session=True,
            )
        except BaseException:
            for descriptor in (*theirs, self._requests, self._replies):
                os.close(descriptor)
            raise
        os.close(request_end)
        os.close(reply_end)
        ours = (self._requests, self._replies, self._shared)
        self._finalizer = weakref.finalize(self, _end, self._process, ours, os.getpid())  # when Python ends, too
        os.set_blocking(self._requests, False)
        os.set_blocking(self._replies, False)
        self.reply = self.ask(order, [constants], START_LIMIT)

    @property
    def pid(self) -> int:
        """Process id, which is also that of its group."""
        return self._process.pid

    @property
    def alive(self) -> bool:
        """Whether it can still be asked."""
        return self._finalizer.alive and not has_ended(self._process)

    def share(self, memory_size: int) -> None:
        """Look into the arena that the process has made."""
        size = Arena.size(memory_size)
        if os.fstat(self._shared).st_size != size:
            raise LostProcessError("crash", "its process answered with something that is no answer")
        self.arena = Arena(memoryview(mmap.mmap(self._shared, size, access=mmap.ACCESS_READ)), memory_size)

    def end(self) -> None:
        """End the process and all that it started; harmless where that has been done."""
        self._finalizer()

    def ask(self, header: dict[str, Any], arrays: list[FloatArray], time_limit: float | None = None) -> Frame:
        """Send a message and wait for the reply.

        Parameters
        ----------
        header : dict
        arrays : list of ndarray
        time_limit : float, optional
            Seconds without a sign of life; those of one call of the routine if left out.

        Raises
        ------
        LostProcessError
            If the process dies, hangs or answers with something that is no message; it is ended then.
        """
        limit = self._time_limit if time_limit is None else time_limit
        patience = Patience(limit, self.arena, self._process)
        try:
            self._send(packed(header, arrays), patience)
            return receive(lambda size: self._read(size, patience))
        except TimeoutError:
            self.end()
            raise LostProcessError("hang", f"no answer within {limit:g} s") from None
        except (EOFError, BrokenPipeError):
            raise LostProcessError("crash", self._cause_of_death()) from None
        except BrokenFrameError:
            self.end()
            raise LostProcessError("crash", "its process answered with something that is no answer") from None
        except BaseException:
            self.end()
            raise

    def _send(self, message: bytes, patience: Patience) -> None:
        view = memoryview(message)
        while view:
            patience.wait(self._requests, select.POLLOUT)
            with contextlib.suppress(BlockingIOError):
                view = view[os.write(self._requests, view) :]

    def _read(self, size: int, patience: Patience) -> bytes:
        while True:
            patience.wait(self._replies, select.POLLIN)
            with contextlib.suppress(BlockingIOError):
                return os.read(self._replies, min(size, 2**20))

    def _cause_of_death(self) -> str:
        until = time.monotonic() + DYING
        while not has_ended(self._process) and time.monotonic() < until:
            time.sleep(0.001)
        ended = has_ended(self._process)
        self.end()
        status = self._process.returncode
        if not ended:
            return "its process closed the connection to the harness"
        if status >= 0:
            return f"its process ended with status {status}"
        try:
            name = signal.Signals(-status).name
        except ValueError:
            name = f"signal {-status}"
        return f"its process was killed by {name}"
