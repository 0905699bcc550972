"""A digest of content: equal where everything that a case hangs on is equal, whatever the file looks like."""

from __future__ import annotations

import dataclasses
import hashlib
from collections.abc import Iterator, Mapping, Sequence

import numpy as np

__all__ = ["digest"]


def digest(value: object) -> str:
    """Digest of numbers, texts, arrays, and of dataclasses, tables and lists of them.

    Parameters
    ----------
    value : object

    Returns
    -------
    digest : str
        Equal for equal types, shapes and bits.

    Raises
    ------
    TypeError
        For anything whose content cannot be seen.

    Examples
    --------
    >>> digest({"a": 1.0, "b": [2]}) == digest({"b": [2], "a": 1.0})
    True
    >>> digest([1.0]) == digest([np.nextafter(1.0, 2.0)])
    False
    """
    mark = hashlib.sha256()
    for part in _parts(value):
        mark.update(len(part).to_bytes(8, "big") + part)
    return mark.hexdigest()


def _parts(value: object) -> Iterator[bytes]:
    if dataclasses.is_dataclass(value):
        yield type(value).__name__.encode()
        for field in dataclasses.fields(value):
            yield from _parts(getattr(value, field.name))
    elif isinstance(value, np.ndarray):
        yield f"{value.dtype.str} {value.shape}".encode()
        yield np.ascontiguousarray(value).tobytes()
    elif isinstance(value, Mapping):
        yield f"table {len(value)}".encode()
        for key in sorted(value):
            yield from _parts(key)
            yield from _parts(value[key])
    elif isinstance(value, Sequence) and not isinstance(value, str):
        yield f"list {len(value)}".encode()
        for item in value:
            yield from _parts(item)
    elif value is None or isinstance(value, bool | int | float | str):
        yield f"{type(value).__name__} {value!r}".encode()
    else:
        raise TypeError(f"no digest of a {type(value).__name__}")
