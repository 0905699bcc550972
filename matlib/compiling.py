"""How the kernels are compiled: the decorators they share, what is kept on disk, and a word to whoever waits."""

from __future__ import annotations

import sys
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numba
from numba.core import event
from numba.core.options import DefaultOptions

__all__ = ["announced", "fused", "kept", "plain", "source_stamp", "summing"]

# They make no arrays, and so need not count who holds one; what is counted costs more than the arithmetic of a short chunk.
_UNCOUNTED: dict[str, Any] = {"_nrt": False} if hasattr(DefaultOptions, "_nrt") else {}

plain = numba.njit(error_model="numpy", nogil=True, **_UNCOUNTED)
fused = numba.njit(error_model="numpy", nogil=True, fastmath={"contract"}, **_UNCOUNTED)
"""Products may be fused with sums."""

summing = numba.njit(error_model="numpy", nogil=True, fastmath={"contract", "reassoc"}, **_UNCOUNTED)
"""Sums may be taken in another order as well, nothing else: what is not finite stays so."""

kept = numba.njit(error_model="numpy", nogil=True, cache=True)
"""Kept on disk with all that it calls, once compiled: beside its source, or in a folder of the user's where that cannot be
written, or in ``NUMBA_CACHE_DIR``. What the function encloses is part of the key; let it enclose a `source_stamp`."""


def source_stamp(*files: str) -> int:
    """Checksum of the sources that compiled code is made from.

    numba itself looks at the file of the outermost function only, and would go on using what was made from an older helper.
    """
    stamp = 0
    for file in files:
        stamp = zlib.crc32(Path(file).read_bytes(), stamp)
    return stamp


class _Notice(event.Listener):
    """Says once that something is being compiled."""

    said = False

    def on_start(self, event: Any) -> None:
        if not _Notice.said and sys.stderr.isatty():
            print("cardproof: compiling the kernels, once on this machine (a few seconds)", file=sys.stderr, flush=True)
        _Notice.said = True

    def on_end(self, event: Any) -> None:
        pass


@contextmanager
def announced() -> Iterator[None]:
    """Say on the terminal, once, when a call inside has to compile."""
    if _Notice.said:
        yield
        return
    with event.install_listener("numba:compile", _Notice()):
        yield
