"""``cardproof steps``."""

from __future__ import annotations

from drivers.commands.inputs import gather
from drivers.commands.output import deliver, parse_tolerance, require_folder, require_picture, save_figure
from drivers.path import Path
from drivers.path_file import read_path
from drivers.report.progress import progress
from drivers.report.steps import steps_data, steps_figure, steps_tables
from drivers.studies.steps import Rule, steps
from matlib.card import Card, read_card
from matlib.recursion import RECURSIONS, find_recursion
from matlib.shift import SHIFT_RULES, find_shift_rule

__all__ = ["run"]

RUNS_OF_A_RULE = 10
OTHER_RUNS = 30


def run(
    card_file: str,
    path_file: str,
    *,
    tolerance: str,
    shift_rule: str | None = None,
    recursion: str | None = None,
    plot: str | None = None,
    json_file: str | None = None,
) -> int:
    """Say what increments a path needs; exit 0 where its own are small enough."""
    require_folder(json_file)
    require_picture(plot)
    fraction = parse_tolerance(tolerance)
    for name, find in ((shift_rule, find_shift_rule), (recursion, find_recursion)):
        if name is not None:
            find(name)
    card, path = gather([lambda: read_card(card_file), lambda: read_path(path_file)])
    assert isinstance(card, Card)
    assert isinstance(path, Path)
    rule = Rule(shift_rule=shift_rule or "integrated", recursion=recursion or "exponential")
    rules = [
        Rule(shift_rule=one, recursion=other)
        for one in ([shift_rule] if shift_rule else SHIFT_RULES)
        for other in ([recursion] if recursion else RECURSIONS)
    ]
    with progress(f"increments of {path.name}", RUNS_OF_A_RULE * len(rules) + OTHER_RUNS) as advance:
        result = steps(card.material(), path, tolerance=fraction, rule=rule, rules=rules, progress=advance)
    if plot is not None:
        save_figure(steps_figure(result), plot)
    return deliver(steps_data(result, card), steps_tables(result, card), json_file)
