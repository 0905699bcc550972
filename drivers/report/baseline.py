"""Baselines, recorded and verified, as tables and plain data."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from drivers.baseline_file import Baseline
from drivers.report.data import envelope, place_data, slip_data
from drivers.report.moved import moved_data, moved_sentence
from drivers.report.tables import give_way, percent, place_text, plain_table, slip_tables, verdict_line
from drivers.studies.baseline import PathVerdict, Verification
from drivers.studies.moved import Moved
from drivers.studies.slips import Slip
from drivers.studies.spread import LEVEL, Scatter
from matlib.card import Card
from matlib.version import __version__

__all__ = ["Verified", "recorded_data", "recorded_tables", "verdict_text", "verified_data", "verified_tables"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Verified:
    """A card held against a baseline, and all that was found out about it.

    Parameters
    ----------
    card : Card
    baseline : Baseline
    verification : Verification
    moved : tuple of Moved
    moved_reason : str
        Why it is not known what moved.
    slips : tuple of Slip
        Known slips that explain a change.
    scatter : Scatter or None
        Where the spread of the calibration was given.
    """

    card: Card
    baseline: Baseline
    verification: Verification
    moved: tuple[Moved, ...]
    moved_reason: str = ""
    slips: tuple[Slip, ...] = ()
    scatter: Scatter | None = None

    @property
    def holds(self) -> bool:
        """Whether the behaviour is as accepted."""
        return self.verification.holds


def recorded_data(baseline: Baseline, card: Card, file: str) -> dict[str, Any]:
    """What was recorded."""
    paths = [
        {
            "name": recorded.path.name,
            "tolerance": recorded.tolerance,
            "probe_points": len(recorded.rows),
            "estimated": recorded.estimated,
            "peak_stress": recorded.response.peak_stress,
        }
        for recorded in baseline.paths
    ]
    return envelope("record", True, card={"name": card.document.name, "file": card.file}, file=file, paths=paths)


def recorded_tables(baseline: Baseline, card: Card, file: str) -> list[RenderableType]:
    """What was recorded."""
    table = plain_table("", [("path", "left"), ("tolerance", "right"), ("probe points", "right"), ("bound", "left")])
    for recorded in baseline.paths:
        kind = "estimated" if recorded.estimated else "guaranteed"
        table.add_row(recorded.path.name, percent(recorded.tolerance), str(len(recorded.rows)), kind)
    count = len(baseline.paths)
    line = f"the behaviour of {card.name} on {count} path{'s' if count > 1 else ''} is recorded in {file}"
    return [verdict_line(True, line), table]


def verified_data(verified: Verified) -> dict[str, Any]:
    """Verdict of one card."""
    content = verified_content(verified)
    content |= {"scatter": _scatter_data(verified.scatter)} if verified.scatter is not None else {}
    return envelope("verify", verified.holds, **content)


def verified_content(verified: Verified) -> dict[str, Any]:
    """Card, baseline, paths and what moved."""
    baseline = verified.baseline
    return {
        "card": {"name": verified.card.document.name, "file": verified.card.file},
        "baseline": {"file": baseline.file, "card": baseline.card_name, "version": baseline.version},
        "paths": [_path_data(path) for path in verified.verification.paths],
        "moved": moved_data(verified.moved),
        "moved_reason": verified.moved_reason,
        "slips": [slip_data(slip) for slip in verified.slips],
    }


def _path_data(path: PathVerdict) -> dict[str, Any]:
    difference = path.difference
    return {
        "name": path.name,
        "relative": path.relative,
        "tolerance": path.tolerance,
        "holds": path.holds,
        "quantity": None if difference is None else difference.quantity,
        "component": None if difference is None else difference.component,
        "largest_difference": None if difference is None else difference.value,
        "bound": path.bound,
        "estimated": path.estimated,
        "at": None if difference is None else place_data(difference.at),
        "reason": path.reason,
    }


def _scatter_data(scatter: Scatter) -> dict[str, Any]:
    return {
        "samples": scatter.samples,
        "redrawn": scatter.redrawn,
        "seed": scatter.seed,
        "level": LEVEL,
        "exceeds": scatter.exceeds,
        "paths": [
            {
                "name": path.verdict.name,
                "band": path.band,
                "middle": path.middle,
                "change": path.verdict.relative,
                "exceeds": path.exceeds,
            }
            for path in scatter.paths
        ],
    }


def verdict_text(path: PathVerdict) -> str:
    """One path in words: how far it has moved, in what, and what is accepted."""
    difference = path.difference
    if difference is None:
        return f"no answer on path {path.name!r}: {path.reason}"
    return (
        f"{percent(difference.relative)} of the peak {difference.quantity} from what was recorded on path {path.name!r}, "
        f"where {percent(path.tolerance)} is accepted"
    )


def verified_tables(verified: Verified) -> list[RenderableType]:
    """Verdict, what moved, paths: the worst first."""
    verification = verified.verification
    behaves = "behaves as accepted" if verified.holds else "does not behave as accepted"
    line = f"{verified.card.name} {behaves}: at most {verdict_text(verification.worst)}"
    if verification.worst.difference is None:
        line = f"{verified.card.name} {behaves}: {verdict_text(verification.worst)}"
    tables: list[RenderableType] = [verdict_line(verified.holds, line), *slip_tables(verified.slips)]
    tables += _moved_lines(verified)
    tables.append(_paths_table(verification.paths, verified.card))
    if verified.scatter is not None:
        tables += _scatter_tables(verified.scatter)
    return tables


def _moved_lines(verified: Verified) -> list[RenderableType]:
    if verified.moved_reason:
        return [Text(f"What moved is not known: {verified.moved_reason}")]
    if verified.moved:
        return [Text("What moved:"), *(Text(f"  {moved_sentence(moved)}") for moved in verified.moved)]
    if verified.holds:
        return [Text(f"Nothing moved: the card says what {verified.baseline.card_name} says, to rounding.")]
    then = verified.baseline.version
    text = "Nothing in the card moved: the answer of the program did. "
    return [Text(text + f"The baseline was recorded by version {then}, this is version {__version__}.")]


def _paths_table(paths: Sequence[PathVerdict], card: Card) -> Table:
    columns = [("path", "left"), ("change", "right"), ("accepted", "right"), ("in", "left"), ("largest at", "left")]
    table = give_way(plain_table("", [*columns, ("", "left")]), {0: 12, 4: 12})
    for path in sorted(paths, key=lambda path: -path.ratio):
        mark = Text("holds", style="green") if path.holds else Text("moved", style="red")
        difference, accepted = path.difference, percent(path.tolerance)
        if difference is None:
            table.add_row(path.name, "no answer", accepted, "", path.reason, mark)
            continue
        where = "" if difference.value == 0.0 else place_text(difference.at, card.temperature_unit)
        table.add_row(path.name, percent(difference.relative), accepted, difference.component, where, mark)
    return table


def _scatter_tables(scatter: Scatter) -> list[RenderableType]:
    level = percent(LEVEL)
    beyond = sum(path.exceeds for path in scatter.paths)
    if beyond:
        text = f"The change exceeds the scatter of the calibration on {beyond} of {len(scatter.paths)} paths"
    else:
        text = "The change lies within the scatter of the calibration on every path"
    text += f" ({scatter.samples} samples, of which {level} lie within the scatter; seed {scatter.seed})."
    if scatter.redrawn:
        text += f" {scatter.redrawn} draws were no material, or had no answer, and were drawn again."
    table = plain_table("", [("path", "left"), ("change", "right"), (f"scatter, {level}", "right"), ("", "left")])
    for path in sorted(scatter.paths, key=lambda path: not path.exceeds):
        mark = Text("exceeds", style="yellow") if path.exceeds else Text("within")
        change = "no answer" if path.verdict.relative is None else percent(path.verdict.relative)
        table.add_row(path.verdict.name, change, percent(path.band), mark)
    return [Text(text), table]
