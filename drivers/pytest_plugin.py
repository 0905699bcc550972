"""Cards as tests: every ``X.baseline.json`` beside an ``X.card.toml`` is collected, one test a path of the baseline.

Nothing heavy is imported until a baseline is collected. Switched off by ``-p no:cardproof``.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from drivers.baseline_file import Baseline
    from drivers.studies.baseline import PathVerdict
    from matlib.card import Card

__all__ = [
    "AcceptedPath",
    "BaselineFile",
    "CardMovedError",
    "ReadableBaseline",
    "likely_slip_lines",
    "pytest_collect_file",
]

BASELINE, CARD = ".baseline.json", ".card.toml"
MARK = b'"format": "cardproof baseline"'
MARK_WITHIN = 100  # bytes


def pytest_collect_file(file_path: Path, parent: pytest.Collector) -> BaselineFile | None:
    """Collect baselines; other people's files of that ending are left alone."""
    if not file_path.name.endswith(BASELINE):
        return None
    card = file_path.with_name(file_path.name.removesuffix(BASELINE) + CARD)
    if not (card.exists() or _is_marked(file_path)):
        return None
    return BaselineFile.from_parent(parent, path=file_path)


def _is_marked(file: Path) -> bool:
    try:
        with file.open("rb") as stream:
            return MARK in stream.read(MARK_WITHIN)
    except OSError:
        return False


class CardMovedError(Exception):
    """A card does not behave as accepted on one path; the text says how far it has moved, and where."""


class BaselineFile(pytest.File):
    """A baseline and the card beside it."""

    slip_lines: list[str] | None = None
    """Of this baseline, once a path has failed: they are looked for once, on all its paths."""

    def collect(self) -> Iterator[pytest.Item]:
        """One test a path; one that fails where the baseline or the card cannot be used."""
        from drivers.baseline_file import read_baseline
        from matlib.card import read_card
        from matlib.errors import CardproofError

        card_file = self.path.with_name(self.path.name.removesuffix(BASELINE) + CARD)
        try:
            baseline, card = read_baseline(self.path), read_card(card_file)
            card.material()
        except CardproofError as error:
            yield ReadableBaseline.from_parent(self, name="readable", error=error)
            return
        taken: dict[str, int] = {}
        for number, recorded in enumerate(baseline.paths):
            name = recorded.path.name
            taken[name] = taken.get(name, 0) + 1
            yield AcceptedPath.from_parent(
                self,
                name=name if taken[name] == 1 else f"{name} ({taken[name]})",
                card=card,
                baseline=baseline,
                number=number,
            )


class _CardItem(pytest.Item):
    """A test of a card; failures are told in its words, without a traceback."""

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """The message alone for what is known to go wrong; all there is for anything else."""
        from matlib.errors import CardproofError

        if isinstance(excinfo.value, CardMovedError | CardproofError):
            return str(excinfo.value)
        return super().repr_failure(excinfo, style)

    def reportinfo(self) -> tuple[Path, int | None, str]:
        """Where the test stands, and its heading."""
        return self.path, None, f"{self.path.name}: {self.name}"


class ReadableBaseline(_CardItem):
    """Fails with what is wrong with the baseline or the card."""

    def __init__(self, *, error: Exception, **rest: Any) -> None:
        super().__init__(**rest)
        self.error = error

    def runtest(self) -> None:
        """Fail."""
        raise self.error


class AcceptedPath(_CardItem):
    """Does the card still behave as accepted on one path?"""

    def __init__(self, *, card: Card, baseline: Baseline, number: int, **rest: Any) -> None:
        super().__init__(**rest)
        self.card = card
        self.baseline = baseline
        self.number = number

    def runtest(self) -> None:
        """Solve the path and compare; the change and its tolerance become properties of the test."""
        from drivers.studies.baseline import verify_path

        verdict = verify_path(self.card.material(), self.baseline.paths[self.number])
        self.user_properties += [("relative", verdict.relative), ("tolerance", verdict.tolerance)]
        if not verdict.holds:
            raise CardMovedError(self._failure(verdict))

    def _failure(self, verdict: PathVerdict) -> str:
        from drivers.report.baseline import verdict_text
        from drivers.report.tables import place_text
        from matlib.errors import CardproofError

        lines = [f"{self.card.name} ({self.card.file}) does not behave as accepted: {verdict_text(verdict)}"]
        difference = verdict.difference
        if difference is not None:
            size = f"{difference.value:.4g}"
            if difference.quantity == "stress":
                size = f"{self.card.stress_unit.from_si(difference.value):.4g} {self.card.stress_unit.name}"
            where = place_text(difference.at, self.card.temperature_unit)
            lines.append(f"largest: {difference.component} by {size}, at {where}")
        try:
            lines += self._moved_lines()
            lines += self._slip_lines()
        except CardproofError as error:
            lines.append(f"what moved is not known: {error}")
        return "\n".join(lines)

    def _moved_lines(self) -> list[str]:
        from drivers.report.moved import moved_sentence
        from drivers.studies.moved import what_moved

        moved = what_moved(self.baseline.card(), self.card, [self.baseline.paths[self.number]])
        return [moved_sentence(one) for one in moved if one.matters]

    def _slip_lines(self) -> list[str]:
        file = self.parent
        assert isinstance(file, BaselineFile)
        if file.slip_lines is None:
            file.slip_lines = likely_slip_lines(self.baseline, self.card)
        return file.slip_lines


def likely_slip_lines(baseline: Baseline, card: Card) -> list[str]:
    """The likely slip in a line, where a known one explains the change; the only place where slips are looked for here."""
    from drivers.studies.baseline_slips import slips_since

    slips = slips_since(baseline.card(), card, baseline.paths)
    return [f"likely slip: {slip.id}. {slip.explanation}" for slip in slips[:1]]
