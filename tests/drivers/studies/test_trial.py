"""Runs of a study and what they are judged against: as `drive` and `solve` give them, and nothing twice."""

from dataclasses import dataclass, field

import numpy as np
import pytest

from drivers.history import History
from drivers.path import Cycle, Path
from drivers.point import drive
from drivers.reference import Reference, solve
from drivers.studies.runner import OWN, CardRunner, Rule
from drivers.studies.trial import Judged, Trials, total_increments
from matlib.errors import ShiftRangeError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.shift import SHIFT_RULES, NoShift
from tests.drivers.studies.step_cases import draw_case, path_of, segment, solid

DEFAULT = Rule(shift_rule="integrated", recursion="exponential")
RULES = [Rule(shift_rule=one, recursion=other) for one in SHIFT_RULES for other in RECURSIONS]


def trials_of(material: Material, path: Path, accuracy: float = 1e-7) -> Trials:
    return Trials(runner=CardRunner(material=material), path=path, accuracy=accuracy)


def unload() -> Path:
    """Pulled by strain, then let go: control changes, and what is left is the response's own."""
    pull = segment("uniaxial stress", durations=[5.0])
    rest = segment("uniaxial stress", by="stress", value=0.0, durations=[20.0], temperatures=[350.0])
    return path_of(pull, rest, mode="uniaxial stress")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Counting(CardRunner):
    """Counts what it is asked for."""

    asked: list[str] = field(default_factory=list)

    def run(self, rule: Rule, path: Path) -> History:
        self.asked.append(f"run {rule} {path.increment_count}")
        return CardRunner.run(self, rule, path)

    def truth(self, path: Path, accuracy: float) -> Reference:
        self.asked.append(f"truth {path.increment_count}")
        return CardRunner.truth(self, path, accuracy)


@pytest.mark.parametrize("seed", range(10))
def test_a_run_is_what_drive_gives(seed):
    case = draw_case(seed)
    rule, path = RULES[(5 * seed) % len(RULES)], case.path
    ours = CardRunner(material=case.material).run(rule, path)
    theirs = drive(rule.routine(case.material), path)
    assert ours.segment == theirs.segment
    np.testing.assert_array_equal(ours.time, theirs.time)
    np.testing.assert_array_equal(ours.temperature, theirs.temperature)
    for name in ("strain", "stress"):
        a, b = getattr(ours, name), getattr(theirs, name)
        # A controlled stress comes back with a rounding of the sum of all terms, on the stress of an elastic solid.
        scale = np.abs(b).max() + (1e11 * np.abs(theirs.strain).max() if name == "stress" else 0.0)
        np.testing.assert_allclose(a, b, rtol=0, atol=1e-13 * scale * len(ours))
    np.testing.assert_allclose(ours.reduced_time, theirs.reduced_time, rtol=1e-12)  # another order of summation


def test_a_run_where_control_changes_is_what_drive_gives():
    material = solid((0.5, 20.0), (0.3, 0.4))
    ours = CardRunner(material=material).run(DEFAULT, unload())
    np.testing.assert_array_equal(ours.strain, drive(DEFAULT.routine(material), unload()).strain)


def test_a_run_without_a_finite_response_is_infinitely_wrong_from_its_place_on():
    liquid = Material(
        shear=PronySeries.from_fractions(1e9, [1.0], [1e-3]), bulk=PronySeries.elastic(3e9), shift=NoShift()
    )
    path = path_of(segment("uniaxial stress", durations=[1e9]), mode="uniaxial stress")
    found = trials_of(liquid, path).difference(Rule(shift_rule="integrated", recursion="midpoint"), (8,))
    assert (found.relative, found.at.segment, found.at.time) == (np.inf, "pull", 0.0)


def test_a_path_into_the_pole_is_refused():
    path = path_of(segment("uniaxial strain", temperatures=[219.0]))  # T_ref - C2 = 220 K
    with pytest.raises(ShiftRangeError):
        trials_of(solid((1.0,), (0.5,)), path).difference(DEFAULT, (8,))


@pytest.mark.parametrize("seed", range(10))
def test_the_difference_is_that_of_drive_and_the_reference_solution(seed):
    case = draw_case(seed)
    counts = tuple(s.increments for s in case.path.segments)
    truth = solve(case.material, case.path, accuracy=1e-7).history
    run = drive(case.rule.routine(case.material), case.path)
    expected = max(
        float(np.abs(a - b).max() / np.abs(a).max())
        for a, b in (
            (truth.stress_components, run.stress_components),
            (truth.strain_components, run.strain_components),
        )
    )
    found = trials_of(case.material, case.path).difference(case.rule, counts).relative
    assert found == pytest.approx(expected, rel=1e-6, abs=1e-12)  # where the error itself is near rounding


def test_nothing_is_run_or_solved_twice():
    case = draw_case(4)
    runner = Counting(material=case.material)
    trials = Trials(runner=runner, path=case.path, accuracy=1e-6)
    n = len(case.path.segments)
    for _ in range(2):
        for count in (8, 16, 2048):
            trials.judge(case.rule, (count,) * n, (16,) * n)
            trials.difference(case.rule, (count,) * n, at=(16,) * n)
    assert len(runner.asked) > 5
    solved = [asked for asked in runner.asked if asked.startswith("truth")]
    assert len(solved) == len(set(solved))
    # A long run is taken once for the rows that it shares with others, and once for those chosen for it alone.
    assert max(runner.asked.count(asked) for asked in runner.asked) <= 2


def test_a_free_solid_that_only_expands_is_judged_on_strain():
    material = Material(
        shear=PronySeries.from_fractions(1e9, [0.5], [1.0]),
        bulk=PronySeries.elastic(3e9),
        shift=NoShift(),
        expansion=7e-5,
    )
    path = path_of(
        segment("uniaxial stress", by="stress", value=0.0, durations=[60.0], temperatures=[300.0]),
        mode="uniaxial stress",
    )
    run = CardRunner(material=material).run(DEFAULT, path)
    assert np.abs(run.stress).max() > 0.0  # rounding of 3 K alpha dT, with nothing beside it to be small against
    assert trials_of(material, path).difference(DEFAULT, (8,)).relative < 1e-12


@pytest.mark.parametrize("seed", [1, 3, 4, 9, 10, 16])
def test_chosen_ends_of_a_long_run_show_nearly_all_of_its_error(seed):
    case = draw_case(seed)
    counts = (1536,) * len(case.path.segments)
    trials = trials_of(case.material, case.path)
    coarse = trials.judge(case.rule, counts, (1,) * len(counts))
    whole = trials.judge(case.rule, counts, counts)
    assert (coarse.complete, whole.complete) == (False, True)
    bound = coarse.bound + whole.bound
    assert 0.97 * whole.relative - bound <= coarse.relative <= whole.relative + bound


def test_ringing_that_lasts_a_few_of_many_increments_is_not_missed():
    material = solid((1e-4,), (0.8,), NoShift())
    jump = segment("uniaxial strain", durations=[0.0])
    path = path_of(jump, segment("uniaxial strain", durations=[1.0], held=np.ones(6, dtype=np.bool_)))
    rule = Rule(shift_rule="integrated", recursion="trapezoidal")
    judged = trials_of(material, path).judge(rule, (4096, 4096), (64, 64))
    r = 1.0 / 4096 / 1e-4
    wrong = abs((1.0 - r / 2.0) / (1.0 + r / 2.0) - np.exp(-r))  # of the relaxing part, after the first increment
    peak, part = 3e9 + 4.0 / 3.0 * 1e9, 4.0 / 3.0 * 0.8e9
    assert not judged.complete
    assert judged.relative == pytest.approx(wrong * part / peak, rel=1e-6)


def test_control_that_changes_is_judged_on_shared_rows():
    trials = trials_of(solid((0.5, 20.0), (0.3, 0.4)), unload(), 1e-5)
    judged = trials.judge(DEFAULT, (64, 64), (16, 16))
    assert not judged.complete
    assert judged.relative == trials.difference(DEFAULT, (64, 64), at=(16, 16)).relative


def test_a_tolerance_is_met_with_the_bound_and_with_room_where_not_all_ends_were_judged():
    assert Judged(relative=0.9e-2, bound=0.1e-2, complete=True).meets(1.0001e-2)
    assert not Judged(relative=0.95e-2, bound=0.1e-2, complete=True).meets(1e-2)
    assert not Judged(relative=0.98e-2, bound=0.0, complete=False).meets(1e-2)
    assert not Judged(relative=np.inf, bound=0.0, complete=True).meets(1.0)


def test_increments_in_all_count_every_turn_of_a_cycle():
    pull = segment("uniaxial strain")
    path = path_of(pull, Cycle(repeat=3, segments=(pull, segment("uniaxial strain", durations=[0.0]))))
    assert total_increments(path, (5, 2, 7)) == 5 + 3 * (2 + 1)


def test_progress_counts_every_run():
    done: list[int] = []
    case = draw_case(0)
    trials = Trials(runner=CardRunner(material=case.material), path=case.path, accuracy=1e-6, done=done.append)
    for rule in RULES[:3]:
        trials.difference(rule, (4,) * len(case.path.segments))
    assert done == [1, 1, 1]


def test_a_rule_says_its_two_parts_and_a_routine_that_it_has_its_own():
    assert (str(DEFAULT), str(OWN)) == ("integrated, exponential", "its own rule")
    orders = {rule: CardRunner(material=solid((1.0,), (0.5,))).order(rule) for rule in RULES}
    first = {rule for rule in RULES if rule.recursion == "backward-euler" or rule.shift_rule in ("start", "end")}
    assert {rule for rule, order in orders.items() if order == 1.0} == first
    assert {rule for rule, order in orders.items() if order == 2.0} == set(RULES) - first
