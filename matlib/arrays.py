"""The one array type of the package, and the checks that every constructor shares."""

from __future__ import annotations

import math
from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from matlib.errors import ParameterError

__all__ = ["BoolArray", "FloatArray", "frozen", "require_finite", "require_positive"]

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]


def frozen(values: ArrayLike | Iterable[float]) -> FloatArray:
    """Copy into a read-only, C-contiguous float64 array.

    Examples
    --------
    >>> frozen([1, 2]).flags.writeable
    False
    """
    array = np.array(values, dtype=np.float64, order="C")
    array.setflags(write=False)
    return array


def require_finite(name: str, value: float, unit: str = "") -> float:
    """Return `value` as a float, or raise `ParameterError` where it is not a finite number."""
    number = float(value)
    if not math.isfinite(number):
        raise ParameterError(name, f"a finite number {unit}".rstrip(), value)
    return number


def require_positive(name: str, value: float, unit: str = "") -> float:
    """Return `value` as a float, or raise `ParameterError` where it is not finite and ``> 0``."""
    number = float(value)
    if not (math.isfinite(number) and number > 0.0):
        raise ParameterError(name, f"finite and > 0 {unit}".rstrip(), value)
    return number
