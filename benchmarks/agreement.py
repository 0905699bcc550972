"""Answers before times: every engine's stress against the kernel's, to a stated tolerance."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from benchmarks.engines import Engine
from matlib.arrays import FloatArray

__all__ = ["DisagreementError", "agreement"]


class DisagreementError(AssertionError):
    """An engine gives another answer: a time of it would say nothing."""


def agreement(reference: FloatArray, engines: Mapping[str, tuple[Engine, float]]) -> dict[str, float]:
    """Largest difference of each engine from `reference`, relative to its peak.

    Parameters
    ----------
    reference : ndarray, shape (n, 6)
    engines : dict of str to (engine, tolerance)

    Raises
    ------
    DisagreementError
        If a difference is above the tolerance, or not a number.
    """
    peak = float(np.abs(reference).max())
    found = {}
    for name, (engine, tolerance) in engines.items():
        difference = float(np.abs(engine() - reference).max()) / peak
        if not difference <= tolerance:
            raise DisagreementError(f"{name} is {difference:.3g} of the peak off, above {tolerance:g}")
        found[name] = difference
    return found
