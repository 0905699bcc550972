"""``cardproof verify``."""

from __future__ import annotations

from typing import TYPE_CHECKING

from drivers.baseline_file import Baseline, read_baseline
from drivers.commands.inputs import gather
from drivers.commands.output import deliver, require_folder, require_picture, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.library import baseline_beside
from drivers.report.baseline import Verified, verified_data, verified_tables
from drivers.report.progress import progress
from drivers.spread_file import read_spread
from drivers.studies.baseline import verify
from drivers.studies.baseline_slips import slips_since
from drivers.studies.moved import what_moved
from drivers.studies.slips import Slip
from drivers.studies.spread import Scatter, scatter
from matlib.card import Card, read_card
from matlib.errors import CardproofError, FaultyInputError

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run", "verify_card"]

USUAL_CANDIDATES = 8000


def run(
    card_file: str,
    baseline_file: str | None = None,
    *,
    spread: str | None = None,
    samples: int = 200,
    seed: int = 0,
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Hold a card against its baseline."""
    require_folder(json_file)
    require_picture(plot)
    file = baseline_file or baseline_beside(card_file)
    card, baseline = gather([lambda: read_card(card_file), lambda: read_baseline(file)])
    assert isinstance(card, Card)
    assert isinstance(baseline, Baseline)
    verified = verify_card(card, baseline, spread=spread, samples=samples, seed=seed)
    if plot is not None:
        from drivers.report.baseline_plot import verified_figure

        save_figure(verified_figure(verified), plot)

    def page(wanted: Report) -> Page:
        from drivers.report.baseline_page import verified_page

        files = [(card_file, "card"), (file, "baseline"), *([] if spread is None else [(spread, "spread")])]
        return verified_page(verified, origin_of(wanted, inputs_of(wanted, files)))

    return deliver(verified_data(verified), verified_tables(verified), json_file, report, page)


def verify_card(
    card: Card, baseline: Baseline, *, spread: str | None = None, samples: int = 200, seed: int = 0
) -> Verified:
    """Judge a card on every path of a baseline, say what moved, and whether that exceeds a spread.

    Raises
    ------
    FileError
        If the card is no material, or a file cannot be used.
    """
    constants = None if spread is None else read_spread(spread, baseline.card())
    material = card.material()
    try:
        with progress(f"verifying {card.document.name}", len(baseline.paths)) as advance:
            verification = verify(material, baseline, progress=advance)
    except FaultyInputError as error:
        raise error.in_file(baseline.file) from None
    reason = ""
    try:
        moved = what_moved(baseline.card(), card, baseline.paths)
    except CardproofError as error:
        moved, reason = (), f"the recorded card cannot be used any more: {error}"
    slips: tuple[Slip, ...] = ()
    if moved and not verification.holds:
        with progress("looking for slips", USUAL_CANDIDATES) as advance:
            slips = slips_since(baseline.card(), card, baseline.paths, progress=advance)
    found: Scatter | None = None
    if constants is not None:
        with progress("sampling the calibration", samples) as advance:
            found = scatter(baseline.card(), constants, verification, samples=samples, seed=seed, progress=advance)
    return Verified(
        card=card,
        baseline=baseline,
        verification=verification,
        moved=moved,
        moved_reason=reason,
        slips=slips,
        scatter=found,
    )
