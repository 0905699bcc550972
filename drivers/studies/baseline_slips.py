"""The likely slip behind a card that does not behave as recorded."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from drivers.baseline_paths import RecordedPath
from drivers.battery import paths_window
from drivers.studies.slips import Slip, find_slips
from drivers.studies.slips.evidence import Evidence
from matlib.card import Card

__all__ = ["slips_since"]


def slips_since(
    recorded: Card, now: Card, paths: Sequence[RecordedPath], *, progress: Callable[[int], None] | None = None
) -> tuple[Slip, ...]:
    """Slips that explain why a card no longer behaves as it did, the best explanation first.

    Parameters
    ----------
    recorded, now : Card
    paths : sequence of RecordedPath
        On which a correction has to bring the recorded behaviour back.
    progress : callable, optional
        Called with the number of candidates tried since the last call.

    Returns
    -------
    slips : tuple of Slip
        Empty where no known slip does.
    """
    loads = [recorded_path.path for recorded_path in paths]
    window = paths_window(loads)
    evidence = Evidence(temperature=window.temperature, time=window.time, paths=loads)
    return find_slips(recorded, now, evidence, progress=progress)
