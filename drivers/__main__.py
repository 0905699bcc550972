"""``python -m drivers``, and the command ``cardproof``: a start that does not wait for more than it has to."""

from __future__ import annotations

import gc
import os
import sys

__all__ = ["main"]

COLLECT_AFTER = 100_000
"""New objects before the garbage collector looks for circles. What starts a command makes many, which all stay."""


def main() -> int:
    """Run the command line."""
    gc.set_threshold(COLLECT_AFTER)
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # matrices are small here: threads only get in each other's way
    from drivers.cli import main as run

    status = run()
    gc.freeze()  # nothing of it is looked through once more on the way out
    return status


if __name__ == "__main__":
    sys.exit(main())
