"""Commands that take two things: cards, or folders of them."""

from __future__ import annotations

from collections.abc import Sequence

from drivers.commands import compare as compare_command
from drivers.commands import verify as verify_command
from drivers.commands.library import compare_library, verify_library
from drivers.commands.reporting import Report
from drivers.library import is_folder
from matlib.errors import ParameterError

__all__ = ["compare", "verify"]


def compare(
    first: str,
    second: str,
    *,
    paths: Sequence[str] = (),
    tolerance: str = "1%",
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Compare two cards, routines in their place, or two folders of cards."""
    if not (is_folder(first) or is_folder(second)):
        return compare_command.run(
            first, second, paths=paths, tolerance=tolerance, plot=plot, json_file=json_file, report=report
        )
    if plot is not None:
        raise ParameterError("--plot", "left out for folders", repr(plot))
    return compare_library(first, second, paths=paths, tolerance=tolerance, json_file=json_file, report=report)


def verify(
    card: str,
    baseline: str | None = None,
    *,
    spread: str | None = None,
    samples: int = 200,
    seed: int = 0,
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Hold a card against its baseline, or every card of a folder against the baseline beside it."""
    if not is_folder(card):
        return verify_command.run(
            card, baseline, spread=spread, samples=samples, seed=seed, plot=plot, json_file=json_file, report=report
        )
    for name, value in {"BASELINE": baseline, "--spread": spread, "--plot": plot}.items():
        if value is not None:
            raise ParameterError(name, "left out for a folder: each card has its own", repr(value))
    return verify_library(card, json_file=json_file, report=report)
