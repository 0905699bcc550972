"""Orders of every rule, and the fewest increments that hold, run again and one notch below."""

import numpy as np
import pytest

from drivers.path import Path
from drivers.studies.ladder import RuleResult, climb, lattice, observed_order, pieces_of
from drivers.studies.runner import CardRunner, Rule
from drivers.studies.trial import Trials
from matlib.material import Material
from matlib.recursion import RECURSIONS
from matlib.shift import SHIFT_RULES, NoShift
from tests.drivers.studies.step_cases import draw_case, path_of, segment, solid

HELD = np.ones(6, dtype=np.bool_)
RULES = [Rule(shift_rule=one, recursion=other) for one in SHIFT_RULES for other in RECURSIONS]


def trials_of(material: Material, path: Path, accuracy: float = 1e-7) -> Trials:
    return Trials(runner=CardRunner(material=material), path=path, accuracy=accuracy)


def result_of(material: Material, path: Path, rule: Rule, tolerance: float) -> RuleResult:
    return climb(trials_of(material, path, max(1e-10, 1e-3 * tolerance)), rule, tolerance)


@pytest.fixture(scope="module")
def ramp() -> Trials:
    """Strain and temperature ramp together, about a decade of a_T: both halves of every rule have something to do."""
    pull = segment("uniaxial strain", durations=[60.0], temperatures=[350.0])
    return trials_of(solid((3.0, 30.0), (0.3, 0.4)), path_of(pull, T=335.0), 1e-9)


@pytest.mark.parametrize("rule", RULES, ids=str)
def test_the_observed_order_is_that_of_the_weaker_half_of_the_rule(ramp, rule):
    expected = 1.0 if rule.recursion == "backward-euler" or rule.shift_rule in ("start", "end") else 2.0
    assert climb(ramp, rule, 1e-4).order == pytest.approx(expected, abs=0.1)


@pytest.mark.parametrize(
    ("shift_rule", "order"), [("start", 1), ("end", 1), ("middle", 2), ("mean-rate", 2), ("mean-log", 2)]
)
def test_the_observed_order_of_a_clock_alone_is_its_own(shift_rule, order):
    # A step that is held: nothing but the reduced time can go wrong, the exponential recursion is exact.
    jump, cool = (
        segment("uniaxial strain", durations=[0.0]),
        {"durations": [60.0], "temperatures": [350.0], "held": HELD},
    )
    path = path_of(jump, segment("uniaxial strain", **cool), T=335.0)
    result = result_of(solid((30.0,), (0.7,)), path, Rule(shift_rule=shift_rule, recursion="exponential"), 1e-4)
    assert result.order == pytest.approx(order, abs=0.1)


@pytest.mark.parametrize("count", [1, 3, 16, 500])
@pytest.mark.parametrize("seed", [0, 2, 3, 4, 8, 11])
def test_the_integrated_clock_is_the_reference_clock_at_any_count(seed, count):
    case = draw_case(seed)
    trials, counts = trials_of(case.material, case.path, 1e-4), (count,) * len(case.path.segments)
    run = trials.run(Rule(shift_rule="integrated", recursion="midpoint"), counts)
    truth = trials.reference(counts).history
    assert run.reduced_time is not None
    assert truth.reduced_time is not None
    # Closed forms and quadratures of laws promise 1e-12 to 1e-13 of each increment.
    np.testing.assert_allclose(run.reduced_time, truth.reduced_time, rtol=1e-11)


@pytest.mark.parametrize("recursion", list(RECURSIONS))
def test_orders_of_recursions_show_without_any_clock(recursion):
    # A ramp at one temperature; the exponential recursion is exact there.
    path = path_of(
        segment("uniaxial strain", durations=[10.0]), segment("uniaxial strain", durations=[10.0], value=0.0)
    )
    rule = Rule(shift_rule="integrated", recursion=recursion)
    result = result_of(solid((4.0,), (0.7,), NoShift()), path, rule, 1e-5)
    if recursion == "exponential":
        assert result.order is None
        assert max(rung.relative_error for rung in result.errors) < 1e-13
        assert (result.increments_needed, result.each_needed) == (2, 1)
    else:
        assert result.order == pytest.approx(RECURSIONS[recursion].order, abs=0.1)


def test_rungs_double_from_eight_and_carry_the_error_at_their_own_increment_ends(ramp):
    rule = Rule(shift_rule="end", recursion="exponential")
    result = climb(ramp, rule, 1e-3)
    counts = [rung.increments for rung in result.errors]
    assert counts == [8 * 2**k for k in range(len(counts))]
    for rung in result.errors:
        # Two reference solutions of the same run, each within 1e-9.
        assert rung.relative_error == pytest.approx(ramp.difference(rule, (rung.increments,)).relative, abs=2e-9)


@pytest.mark.parametrize("seed", range(14))
def test_the_increments_needed_hold_when_run_and_a_fifth_fewer_do_not(seed):
    case = draw_case(seed)
    rule = RULES[(7 * seed + 3) % len(RULES)]
    tolerance = max(case.tolerance, 5e-4)
    trials = trials_of(case.material, case.path, 1e-3 * tolerance)
    result = climb(trials, rule, tolerance)
    n = len(case.path.segments)
    if (
        seed == 4
    ):  # backward Euler behind a quench, at a term too short for any increments: it needs more than the largest run
        assert result.each_needed is None
        assert trials.judge(rule, (18_432,) * n, (1,) * n).relative > tolerance
        return
    assert result.each_needed is not None
    assert result.increments_needed == case.path.with_increments(result.each_needed).increment_count
    assert trials.difference(rule, (result.each_needed,) * n).relative <= tolerance
    fewer = int(0.8 * result.each_needed)
    if fewer >= 1:
        assert trials.difference(rule, (fewer,) * n).relative > tolerance


def test_one_increment_is_needed_where_one_is_enough():
    path = path_of(segment("uniaxial strain", durations=[1e-6]))  # too short to relax
    result = result_of(solid((4.0,), (0.7,)), path, Rule(shift_rule="start", recursion="midpoint"), 1e-3)
    assert (result.increments_needed, result.each_needed) == (1, 1)


def test_a_rule_that_takes_more_than_the_largest_run_says_so():
    slow = solid((1e-9, 1e4), (0.2, 0.5), NoShift())
    pull = path_of(segment("uniaxial strain", durations=[8.64e4]))
    jump = path_of(
        segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", durations=[8.64e4], held=HELD)
    )
    for path, recursion in ((pull, "backward-euler"), (jump, "trapezoidal")):
        result = result_of(slow, path, Rule(shift_rule="integrated", recursion=recursion), 1e-7)
        assert (result.increments_needed, result.each_needed) == (None, None)
        assert all(rung.relative_error > 1e-7 for rung in result.errors)


def test_rungs_without_a_finite_response_are_left_out():
    liquid = solid((1e-3,), (1.0,), NoShift())
    path = path_of(segment("uniaxial stress", durations=[10.0]), mode="uniaxial stress")
    result = result_of(liquid, path, Rule(shift_rule="integrated", recursion="midpoint"), 1e-2)
    assert all(np.isfinite(rung.relative_error) for rung in result.errors)
    assert result.each_needed is not None
    assert result.each_needed > 8 * 128


def test_a_record_starts_with_one_increment_a_piece():
    rng = np.random.default_rng(1)
    record = segment(
        "uniaxial strain",
        durations=rng.uniform(1.0, 5.0, 40),
        temperatures=335.0 + 15.0 * rng.random(40),
        targets=0.01 * rng.random((40, 6)) * [1, 0, 0, 0, 0, 0],
    )
    result = result_of(
        solid((3.0, 30.0), (0.3, 0.4)), path_of(record), Rule(shift_rule="middle", recursion="midpoint"), 1e-3
    )
    assert result.errors[0].increments == 40
    assert result.order == pytest.approx(2.0, abs=0.1)
    assert result.increments_needed == 40 * (result.each_needed or 0)


def test_a_path_of_jumps_needs_its_jumps():
    jumps = path_of(
        segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", durations=[0.0], temperatures=[300.0])
    )
    result = result_of(solid((3.0,), (0.3,)), jumps, RULES[0], 1e-3)
    assert pieces_of(jumps) == 0
    assert (result.increments_needed, result.each_needed, result.order) == (2, 1, None)


def test_counts_that_are_tried_lie_no_more_than_an_eighth_apart_from_nine_on():
    counts = np.array(lattice(5000))
    assert counts[:16].tolist() == list(range(1, 17))
    ratios = counts[9:] / counts[8:-1]
    assert ratios.max() <= 1.125
    assert {8 * 2**k for k in range(10)} <= set(counts.tolist())


@pytest.mark.parametrize(
    ("errors", "order"),
    [
        ({8: 8e-2, 16: 4e-2, 32: 2e-2}, 1.0),
        ({8: 1.0, 16: 4e-2, 32: 1e-2, 64: 2.5e-3}, 2.0),  # the last three
        ({8: 8e-2, 16: 4e-2}, None),  # two are no order
        ({8: 8e-2, 16: 4e-2, 32: 1e-2}, None),  # slopes 1 and 2
        ({8: 1e-2, 16: 1e-2, 32: 1e-2}, None),  # it does not fall
        ({8: 0.0, 16: 0.0, 32: 0.0}, None),
        ({8: np.inf, 16: 8e-2, 32: 2e-2, 64: 5e-3}, 2.0),
        ({8: 8e-6, 16: 4e-6, 32: 2e-6}, None),  # within the noise
        ({8: 4e-2, 16: 1e-2, 32: 2.5e-3, 64: 1e-6, 128: 1e-6}, 2.0),  # the last two are noise
    ],
)
def test_an_order_is_what_the_last_three_clear_errors_agree_on(errors, order):
    found = observed_order(errors, 1e-5)
    assert found == (None if order is None else pytest.approx(order, abs=1e-12))
