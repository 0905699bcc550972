"""Recommended increments, run and judged with nothing but `drive` and `solve`."""

import numpy as np
import pytest

from drivers.path import Cycle, Path
from drivers.point import drive
from drivers.reference import solve
from drivers.studies.recommend import Recommendation, recommend
from drivers.studies.runner import CardRunner, Rule
from drivers.studies.trial import Trials
from matlib.material import Material
from matlib.shift import NoShift
from tests.drivers.studies.step_cases import Case, draw_case, path_of, segment, solid

DEFAULT = Rule(shift_rule="integrated", recursion="exponential")
HELD = np.ones(6, dtype=np.bool_)
COUNTED = 20


def recommended(material: Material, path: Path, rule: Rule, tolerance: float) -> Recommendation | None:
    accuracy = min(1e-5, max(1e-10, 1e-3 * tolerance))
    return recommend(Trials(runner=CardRunner(material=material), path=path, accuracy=accuracy), rule, tolerance)


def error_when_run(case: Case, counts: tuple[int, ...]) -> float:
    """Largest error at the increment ends of the run, as a part of the peak stress or strain."""
    path = case.path.with_increments(counts)
    run = drive(case.rule.routine(case.material), path)
    truth = solve(case.material, path, accuracy=min(1e-6, 1e-2 * case.tolerance)).history
    return max(
        float(np.abs(a - b).max() / np.abs(a).max())
        for a, b in (
            (truth.stress_components, run.stress_components),
            (truth.strain_components, run.strain_components),
        )
    )


def test_twenty_drawn_cases_meet_their_tolerance_without_waste():
    """Twenty of twenty; a case where every segment stands at one increment cannot be any coarser, and is not counted."""
    ratios: dict[int, float] = {}
    coarsest: dict[int, float] = {}
    for seed in range(60):
        case = draw_case(seed)
        advice = recommended(case.material, case.path, case.rule, case.tolerance)
        assert advice is not None, seed
        ratio = error_when_run(case, advice.counts) / case.tolerance
        assert advice.relative_error == pytest.approx(ratio * case.tolerance, rel=0.02, abs=0.02 * case.tolerance), seed
        (coarsest if max(advice.counts) == 1 else ratios)[seed] = ratio
        if len(ratios) == COUNTED:
            break
    assert len(ratios) == COUNTED
    assert {seed: ratio for seed, ratio in ratios.items() if not 0.2 <= ratio <= 1.0} == {}
    assert {seed: ratio for seed, ratio in coarsest.items() if ratio > 1.0} == {}


@pytest.mark.parametrize("seed", [1, 7, 13, 23])
def test_no_segment_can_do_with_half_of_its_increments_where_all_have_few(seed):
    case = draw_case(seed)
    advice = recommended(case.material, case.path, case.rule, 1e-3)
    assert advice is not None
    total = sum(advice.counts)
    quarters = tuple(max(1, n // 4) for n in advice.counts)
    loose = Case(material=case.material, path=case.path, rule=case.rule, tolerance=1e-3)
    # Second order loses a factor of 16, first order 4; the run stood above a fifth of the tolerance.
    assert total == len(advice.counts) or error_when_run(loose, quarters) > 0.8e-3


def test_segments_get_what_their_error_asks_for():
    """A dwell at constant temperature is exact in one increment; the quench after it is not."""
    path = path_of(
        segment("uniaxial strain", durations=[0.0], label="jump"),
        segment("uniaxial strain", durations=[100.0], held=HELD, label="dwell"),
        segment("uniaxial strain", durations=[60.0], temperatures=[320.0], value=0.0, label="quench"),
    )
    advice = recommended(solid((3.0, 30.0), (0.3, 0.4)), path, DEFAULT, 1e-4)
    assert advice is not None
    assert advice.counts[:2] == (1, 1)
    assert advice.counts[2] > 4
    assert [one.segment for one in advice.advice] == ["jump", "dwell", "quench"]
    assert [one.increments for one in advice.advice] == list(advice.counts)
    assert advice.increments == sum(advice.counts)


def test_the_longest_increment_and_its_temperature_change_are_told():
    path = path_of(
        segment("uniaxial strain", durations=[60.0], temperatures=[370.0], spacing="log"),
        segment("uniaxial strain", durations=[30.0], temperatures=[340.0], value=0.0),
    )
    advice = recommended(solid((3.0, 30.0), (0.3, 0.4)), path, DEFAULT, 1e-3)
    assert advice is not None
    run = drive(DEFAULT.routine(solid((1.0,), (0.1,))), path.with_increments(advice.counts))
    first = slice(0, advice.counts[0] + 1)
    for one, rows in zip(advice.advice, (first, slice(advice.counts[0], None)), strict=True):
        # Differences of times and temperatures that the run gives: a rounding of numbers some ten times as large.
        assert one.largest_increment == pytest.approx(np.diff(run.time[rows]).max(), rel=1e-12)
        assert one.largest_temperature_change == pytest.approx(np.abs(np.diff(run.temperature[rows])).max(), rel=1e-11)


def test_a_temperature_jump_is_one_step():
    path = path_of(
        segment("uniaxial strain", durations=[0.0], temperatures=[300.0], label="jump"),
        segment("uniaxial strain", durations=[60.0], temperatures=[301.0]),
    )
    advice = recommended(solid((3.0,), (0.4,)), path, DEFAULT, 1e-2)
    assert advice is not None
    jump = advice.advice[0]
    assert (jump.increments, jump.largest_increment, jump.largest_temperature_change) == (1, 0.0, 40.0)


def test_a_cycle_is_advised_once_and_counted_as_often_as_it_runs():
    inner = (
        segment("uniaxial strain", durations=[60.0], temperatures=[350.0]),
        segment("uniaxial strain", durations=[60.0], temperatures=[320.0], value=-0.01),
    )
    advice = recommended(solid((3.0, 30.0), (0.3, 0.4)), path_of(Cycle(repeat=5, segments=inner)), DEFAULT, 1e-3)
    assert advice is not None
    assert len(advice.advice) == 2
    assert advice.increments == 5 * sum(advice.counts)


def test_jumps_alone_are_run_as_they_are():
    path = path_of(segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", durations=[0.0], value=0.0))
    advice = recommended(solid((3.0,), (0.4,)), path, DEFAULT, 1e-3)
    assert advice is not None
    assert (advice.counts, advice.increments) == ((1, 1), 2)
    assert advice.relative_error < 1e-15


def test_a_record_is_advised_by_the_piece():
    rng = np.random.default_rng(3)
    record = segment(
        "uniaxial strain",
        durations=rng.uniform(1.0, 20.0, 30),
        temperatures=335.0 + 15.0 * rng.random(30),
        targets=0.01 * rng.random((30, 6)) * [1, 0, 0, 0, 0, 0],
    )
    rule = Rule(shift_rule="middle", recursion="backward-euler")
    advice = recommended(solid((3.0, 30.0), (0.3, 0.4)), path_of(record), rule, 2e-3)
    assert advice is not None
    assert advice.increments == 30 * advice.counts[0] > 30
    assert 0.2 * 2e-3 <= advice.relative_error <= 2e-3


def test_nothing_is_advised_where_the_largest_run_is_not_enough():
    jump = segment("uniaxial strain", durations=[0.0])
    path = path_of(jump, segment("uniaxial strain", durations=[8.64e4], held=HELD))
    rule = Rule(shift_rule="integrated", recursion="trapezoidal")  # it rings at a term of 1e-9 s
    assert recommended(solid((1e-9,), (0.5,), NoShift()), path, rule, 1e-6) is None


def test_a_rule_without_a_response_in_long_increments_is_advised_short_ones():
    liquid = solid((1e-3,), (1.0,), NoShift())
    path = path_of(segment("uniaxial stress", durations=[1.0]), mode="uniaxial stress")
    advice = recommended(liquid, path, Rule(shift_rule="integrated", recursion="midpoint"), 1e-2)
    assert advice is not None
    assert advice.increments > 1000
    assert 0.2e-2 <= advice.relative_error <= 1e-2
