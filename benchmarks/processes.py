"""Whole processes: what a command costs from the shell, against the least that a numerical Python program costs."""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import drivers
from benchmarks.timing import interleaved, ratio

__all__ = ["processes"]

DEMO = Path(drivers.__file__).with_name("demo")
BASE = "import numpy"


def processes(rounds: int, slow_rounds: int) -> dict[str, Any]:
    """Time of processes against ``python -c "import numpy"``.

    Parameters
    ----------
    rounds : int
    slow_rounds : int
        Of the commands that load compiled kernels; with 0 they are left out.
    """
    card, other, path = (str(DEMO / name) for name in _DEMO_FILES)
    with tempfile.TemporaryDirectory() as folder:
        new, base = f"{folder}/new.card.toml", f"{folder}/baseline.json"
        quick = {
            "check": ["check", card],
            "convert": ["convert", card, "--to", "vft", "--reference", "25degC", "-o", new],
        }
        slow = {
            "drive": ["drive", card, path, "--keep", "ends"],
            "steps": ["steps", card, path, "--tolerance", "1%"],
            "compare": ["compare", card, other, "--path", path],
            "record": ["record", card, "--path", path, "-o", base],
            "verify": ["verify", card, base],
        }
        least = {BASE: _task([sys.executable, "-c", BASE], folder)}
        alone = {"import matlib": _task([sys.executable, "-c", "import matlib"], folder)}
        found = _over_base(least | alone | _commands(quick, folder), rounds)
        others = _over_base(least | _commands(slow, folder), slow_rounds) if slow_rounds else {}
    return found | {name: figures for name, figures in others.items() if name not in found}


def _commands(commands: dict[str, list[str]], folder: str) -> dict[str, Callable[[], None]]:
    return {name: _task([sys.executable, "-m", "drivers", *words], folder) for name, words in commands.items()}


def _over_base(tasks: dict[str, Callable[[], None]], rounds: int) -> dict[str, Any]:
    timings = interleaved(tasks, rounds)
    return {
        name: {
            "seconds": timing.least,
            "median_seconds": timing.median,
            "over_import_numpy": ratio(timing, timings[BASE]),
        }
        for name, timing in timings.items()
    }


_DEMO_FILES = ("laboratory.card.toml", "slip.card.toml", "thermal-cycles.path.toml")


def _task(command: list[str], folder: str) -> Callable[[], None]:
    """A run of a command, its output unseen; whatever its verdict, it must not be refused."""
    root = str(Path(drivers.__file__).parents[1])
    environment = os.environ | {
        "PYTHONPATH": os.pathsep.join([root, os.environ.get("PYTHONPATH", "")]).rstrip(os.pathsep)
    }

    def run() -> None:
        done = subprocess.run(command, capture_output=True, cwd=folder, env=environment, timeout=600)
        if done.returncode not in (0, 1):
            raise RuntimeError(f"{' '.join(command[-4:])}: {done.stderr.decode()}")

    return run
