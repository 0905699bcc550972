"""The pages of an audited routine, and of one increment taken again."""

from __future__ import annotations

from drivers.foreign.replay import ReplayResult
from drivers.report.audit import audit_tables, draw_checks, replay_tables
from drivers.report.axes import label_lines, small_figure
from drivers.report.page import Fact, Origin, Page, picture
from drivers.report.parts import parts_of
from drivers.studies.audit import AuditResult
from matlib.card import Card

__all__ = ["audit_page", "replay_page"]

ROW = 0.25  # inches


def audit_page(result: AuditResult, name: str, file: str, card: Card | None, origin: Origin) -> Page:
    """Every check of a routine, measured against its limit."""
    caption = "Every check, those that fall short first; what is measured is said in its sentence"
    parts = parts_of(audit_tables(result, name), [caption])
    wrong = [check for check in result.checks if not check.holds]
    measured = [check for check in result.checks if check.measured is not None and check.limit is not None]
    against = "no card: what needs one was not run" if card is None else card.name
    facts = [Fact(label="Checks that fall short", value=str(len(wrong)), against=f"of {len(result.checks)}")]
    facts += [Fact(label=check.id, value="wrong", against=check.message) for check in wrong[:5]]
    pictures = []
    if measured:
        figure, axes = small_figure(height=1.3 + ROW * len(measured))
        draw_checks(axes, result)
        label_lines(figure)
        finding = f"A check holds where its mark is left of its bar (order: right of it). {len(wrong)} fall short."
        pictures.append(picture(figure, "Measured against limit", finding))
    return Page(
        title=f"Audited: routine {name} ({file}), held against {against}",
        holds=result.holds,
        verdict=parts.verdict,
        lead=parts.lead,
        facts=facts,
        pictures=pictures,
        tables=parts.tables,
        origin=origin,
    )


def replay_page(result: ReplayResult, origin: Origin) -> Page:
    """Whether one increment still fails."""
    replay = result.replay
    return Page(
        title=f"Taken again: the increment of {replay.file}, by routine {replay.routine_file}",
        holds=result.failure is None,
        verdict=parts_of(replay_tables(result)).verdict,
        facts=[Fact(label="Failed then", value=replay.kind, against=replay.detail)],
        origin=origin,
    )
