"""How many processors there are to run on."""

from __future__ import annotations

import os

__all__ = ["processors"]


def processors() -> int:
    """Those that this process may use.

    Examples
    --------
    >>> processors() >= 1
    True
    """
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
