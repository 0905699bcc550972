"""The results as text, and the machine that they belong to."""

from __future__ import annotations

import os
import platform
import shutil
import subprocess
from importlib.metadata import version
from pathlib import Path
from typing import Any

__all__ = ["lines", "machine"]


def machine() -> dict[str, Any]:
    """Processor, number of processors and versions; nothing that tells whose machine it is."""
    gcc = shutil.which("gcc")
    first = subprocess.run([gcc, "-dumpfullversion"], capture_output=True, text=True).stdout.strip() if gcc else None
    return {
        "processor": _processor(),
        "processors": os.cpu_count(),
        "system": platform.system(),
        "python": platform.python_version(),
        "gcc": first,
        **{name: version(name) for name in ("numpy", "scipy", "numba", "llvmlite")},
    }


def _processor() -> str:
    info = Path("/proc/cpuinfo")
    names = info.read_text(encoding="utf-8").splitlines() if info.exists() else []
    wanted = {key: value.strip() for key, _, value in (line.partition(":") for line in names) if value}
    keys = ("model name", "cpu family", "model")
    found = {key.strip(): value for key, value in wanted.items() if key.strip() in keys}
    if "model name" not in found:
        return platform.machine()
    return f"{found['model name']}, family {found.get('cpu family', '?')}, model {found.get('model', '?')}"


def lines(results: dict[str, Any]) -> list[str]:
    """What was found, a line a figure."""
    text = [f"{key}: {value}" for key, value in results["machine"].items()]
    for name, group in results["kernel"].items():
        text += ["", f"{name}: {group['increments']} increments, {group['terms']} terms, six components"]
        text += [f"  {reason}" for reason in group["skipped"]]
        for engine, found in group["engines"].items():
            text.append(
                f"  {engine:28} {1e9 * found['seconds_an_increment']:12.1f} ns an increment"
                f"   kernel takes {found['kernel_over_this']['of_least']:.3g} of its time"
                f" (rounds: {_spread(found['kernel_over_this'])})   differs by {found['difference']:.1e}"
            )
    for name in ("increments", "terms"):
        text += ["", f"an increment, by number of {name}"]
        text += [f"  {count:>10} {1e9 * s:8.1f} ns" for count, s in results[name]["seconds_an_increment"].items()]
    flat = results["increments"]["largest_over_smallest_from_1e4_on"]
    if flat is not None:
        text.append(f"  largest over smallest, from 10000 on: {flat:.3f}")
    text += ["", f"ensembles: {results['ensembles']['increments']} increments, {results['ensembles']['terms']} terms"]
    for size, found in results["ensembles"]["sizes"].items():
        text.append(
            f"  {size:>6} cards: {found['seconds_one_thread']:.3f} s, on two threads"
            f" {found['one_over_two_threads']['of_least']:.2f} times as fast ({_spread(found['one_over_two_threads'])});"
            f" {1e9 * found['seconds_a_term_update_one_thread']:.2f} ns a term-update,"
            f" {1e9 * found['seconds_a_term_update_of_drive']:.2f} in drive"
        )
    kept = results["memory"]
    text += ["", f"peak memory: {kept['peak_KiB_after_1e4']} KiB after 1e4 increments, {kept['peak_KiB']} KiB after "
             f"{kept['increments']}", "", "whole processes"]  # fmt: skip
    for name, found in results["processes"].items():
        text.append(
            f"  {name:16} {found['seconds']:.3f} s, {found['over_import_numpy']['median']:.2f} times import numpy"
            f" ({_spread(found['over_import_numpy'])})"
        )
    return text


def _spread(found: dict[str, float]) -> str:
    return f"{found['quartile_1']:.3g} to {found['quartile_3']:.3g}"
