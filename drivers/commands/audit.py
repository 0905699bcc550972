"""``cardproof audit``."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from drivers.commands.output import deliver, require_folder, require_picture, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.foreign.failure import RoutineFailureError
from drivers.foreign.foreign import ForeignRoutine
from drivers.foreign.replay import replay, replay_name, save_replay
from drivers.foreign.routine_file import read_routine_file
from drivers.report.audit import audit_data, audit_figure, audit_tables, replay_data, replay_tables
from drivers.report.progress import progress
from drivers.studies.audit import CHECKS, CheckResult, audit, subject_of
from matlib.card import read_card
from matlib.errors import ParameterError

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run", "run_replay"]


def run(
    routine_file: str,
    *,
    card_file: str | None = None,
    quick: bool = False,
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Audit a routine; exit 0 where every check holds. A failing increment is saved beside the working folder for replay."""
    require_folder(json_file)
    require_picture(plot)
    described = read_routine_file(routine_file)
    card = described.card if card_file is None else read_card(card_file)
    if card is not None:
        card.material()
    saved: list[str] = []

    def failed(error: Exception) -> CheckResult | None:
        """A finding of a failure of the routine; its first increment is saved."""
        if not isinstance(error, RoutineFailureError):
            return None
        name = replay_name(routine_file)
        if not saved and save_replay(error, name):
            saved.append(name)
        message = " ".join(str(error).split())
        return CheckResult(
            id="", holds=False, measured=None, limit=None, message=f"{message}.", replay=saved[0] if saved else None
        )

    with ForeignRoutine(described) as routine:
        subject = subject_of(routine, card, order=routine.order, quick=quick)
        with progress(f"auditing {routine.name}", len(CHECKS)) as advance:
            result = audit(subject, failed=failed, progress=advance)
        name = routine.name or Path(routine_file).name
    if plot is not None:
        save_figure(audit_figure(result), plot)
    data = audit_data(result, routine_file, None if card is None else card.file)

    def page(wanted: Report) -> Page:
        from drivers.report.audit_page import audit_page

        files = [(routine_file, "routine"), *([] if card_file is None else [(card_file, "card")])]
        return audit_page(result, name, routine_file, card, origin_of(wanted, inputs_of(wanted, files)))

    return deliver(data, audit_tables(result, name), json_file, report, page)


def run_replay(file: str, *, json_file: str | None = None, report: Report | None = None) -> int:
    """Take the increment of a replay file once more; exit 1 where it fails again."""
    require_folder(json_file)
    result = replay(file)

    def page(wanted: Report) -> Page:
        from drivers.report.audit_page import replay_page

        return replay_page(result, origin_of(wanted, inputs_of(wanted, [(file, "replay")])))

    return deliver(replay_data(result), replay_tables(result), json_file, report, page)


def run_either(
    routine_file: str | None,
    *,
    replay_file: str | None,
    card_file: str | None,
    quick: bool,
    plot: str | None,
    json_file: str | None,
    report: Report | None = None,
) -> int:
    """Audit a routine, or replay one increment: one of the two."""
    if (routine_file is None) == (replay_file is None):
        raise ParameterError("ROUTINE", "a routine file, or --replay FILE in its place", routine_file or "neither")
    if replay_file is not None:
        return run_replay(replay_file, json_file=json_file, report=report)
    assert routine_file is not None
    return run(routine_file, card_file=card_file, quick=quick, plot=plot, json_file=json_file, report=report)
