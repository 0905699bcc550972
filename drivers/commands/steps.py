"""``cardproof steps``."""

from __future__ import annotations

from typing import TYPE_CHECKING

from drivers.commands.failing import with_routine
from drivers.commands.inputs import gather, read_subject
from drivers.commands.output import deliver, parse_tolerance, require_folder, require_picture, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.foreign.foreign import ForeignRoutine
from drivers.foreign.routine_file import RoutineFile
from drivers.path import Path
from drivers.path_file import read_path
from drivers.report.progress import progress
from drivers.report.steps import steps_data, steps_tables
from drivers.studies.routine_runner import RoutineRunner
from drivers.studies.steps import Rule, StepsResult, steps
from drivers.studies.trial import OWN
from drivers.subject import Subject
from matlib.card import Card
from matlib.errors import ParameterError
from matlib.recursion import RECURSIONS, find_recursion
from matlib.shift import SHIFT_RULES, find_shift_rule

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run"]

RUNS_OF_A_RULE = 10
OTHER_RUNS = 30
OWN_SHARE = 0.01  # of the tolerance: how well a routine's own finest run is settled
RUNS_OF_ROUTINE = RUNS_OF_A_RULE + OTHER_RUNS


def run(
    card_file: str,
    path_file: str,
    *,
    tolerance: str,
    shift_rule: str | None = None,
    recursion: str | None = None,
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Say what increments a path needs; exit 0 where its own are small enough."""
    require_folder(json_file)
    require_picture(plot)
    fraction = parse_tolerance(tolerance)
    for name, find in ((shift_rule, find_shift_rule), (recursion, find_recursion)):
        if name is not None:
            find(name)
    subject, path = gather([lambda: read_subject(card_file), lambda: read_path(path_file)])
    assert isinstance(path, Path)

    def hand_over(result: StepsResult, subject: Subject) -> int:
        if plot is not None:
            from drivers.report.steps_plot import steps_figure

            save_figure(steps_figure(result), plot)

        def page(wanted: Report) -> Page:
            from drivers.report.steps_page import steps_page

            inputs = inputs_of(wanted, [(card_file, "card or routine"), (path_file, "path")])
            return steps_page(result, subject, origin_of(wanted, inputs))

        return deliver(steps_data(result, subject), steps_tables(result, subject), json_file, report, page)

    if isinstance(subject, RoutineFile):
        if shift_rule or recursion:
            option = "--shift-rule" if shift_rule else "--recursion"
            raise ParameterError(
                option, "given with a card only: a routine has a rule of its own", shift_rule or recursion
            )
        return with_routine("steps", json_file, lambda: hand_over(_of_routine(subject, path, fraction), subject))
    assert isinstance(subject, Card)
    rule = Rule.of_names(shift_rule, recursion)
    rules = [
        Rule(shift_rule=one, recursion=other)
        for one in ([shift_rule] if shift_rule else SHIFT_RULES)
        for other in ([recursion] if recursion else RECURSIONS)
    ]
    with progress(f"increments of {path.name}", RUNS_OF_A_RULE * len(rules) + OTHER_RUNS) as advance:
        result = steps(subject.material(), path, tolerance=fraction, rule=rule, rules=rules, progress=advance)
    return hand_over(result, subject)


def _of_routine(described: RoutineFile, path: Path, tolerance: float) -> StepsResult:
    material = None if described.card is None else described.card.material()
    with ForeignRoutine(described) as routine, progress(f"increments of {path.name}", RUNS_OF_ROUTINE) as advance:
        runner = RoutineRunner(
            routine=routine, claimed_order=routine.order, material=material, own_accuracy=OWN_SHARE * tolerance
        )
        return steps(runner, path, tolerance=tolerance, rule=OWN, rules=[OWN], progress=advance)
