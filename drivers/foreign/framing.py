"""Messages between the harness and the process of a routine: a JSON header, then float64 numbers.

Nothing that a foreign process sends is ever executed: a header is plain JSON, numbers are raw bytes.
"""

from __future__ import annotations

import json
import os
import struct
from collections.abc import Callable, Iterable
from typing import Any

import numpy as np

from matlib.arrays import FloatArray

__all__ = ["BrokenFrameError", "Frame", "packed", "read_from", "receive", "write_to"]

Frame = tuple[dict[str, Any], FloatArray]

_HEAD = struct.Struct("=4sIQ")  # mark, bytes of the header, numbers that follow it
_MARK = b"cpf1"
_LONGEST_HEADER = 2**20  # bytes
_MOST_NUMBERS = 2**27  # 1 GiB


class BrokenFrameError(ValueError):
    """Bytes that are no message."""


def packed(header: dict[str, Any], arrays: Iterable[FloatArray] = ()) -> bytes:
    """One message as bytes."""
    body = b"".join(np.ascontiguousarray(array, dtype=np.float64).tobytes() for array in arrays)
    text = json.dumps(header).encode("ascii")
    return _HEAD.pack(_MARK, len(text), len(body) // 8) + text + body


def receive(read: Callable[[int], bytes]) -> Frame:
    """Read one message.

    Parameters
    ----------
    read : callable
        Gives at most so many bytes, and none at the end.

    Returns
    -------
    header : dict
    numbers : ndarray, shape (n,)

    Raises
    ------
    EOFError
        If the other side has gone.
    BrokenFrameError
        If what came is no message.
    """
    mark, length, count = _HEAD.unpack(_exactly(read, _HEAD.size))
    if mark != _MARK or length > _LONGEST_HEADER or count > _MOST_NUMBERS:
        raise BrokenFrameError("no message")
    text, body = _exactly(read, length), _exactly(read, 8 * count)
    try:
        header = json.loads(text)
    except ValueError:
        raise BrokenFrameError("a header that is no JSON") from None
    if not isinstance(header, dict):
        raise BrokenFrameError("a header that is no table")
    return header, np.frombuffer(body, dtype=np.float64)


def _exactly(read: Callable[[int], bytes], size: int) -> bytes:
    parts = []
    while size > 0:
        part = read(size)
        if not part:
            raise EOFError
        parts.append(part)
        size -= len(part)
    return b"".join(parts)


def read_from(descriptor: int) -> Callable[[int], bytes]:
    """A reader of a blocking descriptor."""
    return lambda size: os.read(descriptor, min(size, 2**20))


def write_to(descriptor: int, message: bytes) -> None:
    """Write all of a message to a blocking descriptor."""
    view = memoryview(message)
    while view:
        view = view[os.write(descriptor, view) :]
