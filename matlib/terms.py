"""The terms of a sum of exponentials, weights and times: checked, ordered, merged."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, frozen, require_finite
from matlib.errors import ParameterError

__all__ = ["checked_terms", "from_zero", "merged_terms", "ratios", "require_not_negative"]

_EQUAL_TIMES = 4.0 * float(np.finfo(np.float64).eps)


def require_not_negative(name: str, value: float, unit: str) -> float:
    """Return `value` as a float, or raise `ParameterError` where it is not finite and ``>= 0``."""
    number = require_finite(name, value, unit)
    if number < 0.0:
        raise ParameterError(name, f">= 0 {unit}".rstrip(), value)
    return number


def checked_terms(name: str, weights: ArrayLike, unit: str, times: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Check the terms of a series and put them in ascending order of time, both read-only."""
    checked = [_positive_vector(name, weights, unit), _positive_vector("times", times, "s")]
    if checked[0].size != checked[1].size:
        raise ParameterError("times", f"as many as `{name}` ({checked[0].size})", checked[1].size)
    ordered = _by_time(*checked)
    return frozen(ordered[0]), frozen(ordered[1])


def _positive_vector(name: str, values: ArrayLike, unit: str) -> FloatArray:
    vector = np.asarray(values, dtype=np.float64)
    if vector.ndim != 1:
        raise ParameterError(name, "one-dimensional", f"shape {vector.shape}")
    wrong = np.flatnonzero(~(np.isfinite(vector) & (vector > 0.0)))
    if wrong.size:
        first = int(wrong[0])
        raise ParameterError(f"{name}[{first}]", f"finite and > 0 {unit}".rstrip(), float(vector[first]))
    return vector


def _by_time(weights: FloatArray, times: FloatArray) -> tuple[FloatArray, FloatArray]:
    order = np.argsort(times, kind="stable")
    return weights[order], times[order]


def merged_terms(weights: FloatArray, times: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Sum the weights of neighbours in ascending `times` that are equal to rounding."""
    if times.size < 2:
        return weights, times
    starts = np.flatnonzero(np.concatenate([[True], np.diff(times) > _EQUAL_TIMES * times[:-1]]))
    return np.add.reduceat(weights, starts), times[starts]


def from_zero(name: str, values: ArrayLike) -> FloatArray:
    """Return `values` as an array, or raise `ParameterError` where one is not ``>= 0``."""
    array = np.asarray(values, dtype=np.float64)
    if not np.all(array >= 0.0):
        found = float(array[~(array >= 0.0)].flat[0])
        raise ParameterError(name, ">= 0", found)
    return array


def ratios(name: str, values: ArrayLike, times: FloatArray) -> FloatArray:
    """``values/times``, shape (..., n), for values ``>= 0``; may be infinite, which decays to zero as it should."""
    with np.errstate(over="ignore", under="ignore"):
        return np.divide.outer(from_zero(name, values), times)
