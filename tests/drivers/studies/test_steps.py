"""The study as a whole: its verdict, what it is judged on, what it refuses."""

import dataclasses
import math

import numpy as np
import pytest

from drivers.path import MODES, Path
from drivers.studies.steps import Rule, StepsResult, steps
from matlib.errors import ParameterError, PoleError, ShiftRangeError
from matlib.material import Material
from matlib.shift import MeasuredRange
from tests.drivers.studies.step_cases import path_of, segment, solid

DEFAULT = Rule(shift_rule="integrated", recursion="exponential")
BACKWARD = Rule(shift_rule="integrated", recursion="backward-euler")
HELD = np.ones(6, dtype=np.bool_)


def ramp(increments: int = 8) -> Path:
    pull = segment("uniaxial strain", durations=[60.0], temperatures=[350.0], increments=increments)
    return path_of(pull, T=335.0)


def study(path: Path, tolerance: float, rule: Rule = DEFAULT, material: Material | None = None) -> StepsResult:
    given = solid((3.0, 30.0), (0.3, 0.4)) if material is None else material
    return steps(given, path, tolerance=tolerance, rule=rule, rules=[rule])


def test_the_verdict_is_that_of_the_paths_own_increments():
    error = study(ramp(), 1e-2).own.relative
    assert study(ramp(), 1.1 * error).holds
    assert not study(ramp(), 0.9 * error).holds


def test_the_verdict_changes_with_the_increments():
    assert not study(ramp(8), 1e-3, BACKWARD).holds
    needed = study(ramp(8), 1e-3, BACKWARD).rules[0].each_needed
    assert needed is not None
    assert study(ramp(needed), 1e-3, BACKWARD).holds


def test_an_error_that_the_bound_cannot_tell_from_the_tolerance_does_not_hold():
    result = study(ramp(), 1e-2)
    near = dataclasses.replace(result, tolerance=result.own.relative + 0.5 * result.own_bound)
    assert 0.0 < result.own_bound <= result.reference_bound
    assert not near.holds
    assert dataclasses.replace(result, tolerance=result.own.relative + 1.5 * result.own_bound).holds


@pytest.mark.parametrize("tolerance", [1e-2, 1e-4, 1e-6])
def test_the_reference_is_a_thousand_times_sharper_than_the_tolerance(tolerance):
    result = study(ramp(), tolerance)
    assert not result.estimated
    assert result.reference_bound <= 1e-3 * tolerance


def test_the_reference_of_mixed_control_is_said_to_be_estimated():
    part = segment("uniaxial strain", durations=[20.0], temperatures=[350.0])
    targets = np.array([[0.01, 1e6, 0.0, 0.0, 0.0, 0.002]])
    mixed = dataclasses.replace(part, targets=targets, stress_controlled=[False, True, True, False, False, False])
    path = Path(name="p", mode=MODES["components"], start_temperature=335.0, parts=(mixed,))
    result = study(path, 1e-2)
    assert result.estimated
    assert result.recommended is not None


def test_a_path_where_control_changes_is_studied():
    pull = segment("uniaxial stress", durations=[5.0], label="pull")
    rest = segment("uniaxial stress", by="stress", value=0.0, durations=[20.0], temperatures=[350.0], label="rest")
    result = study(path_of(pull, rest, mode="uniaxial stress"), 1e-2)
    assert result.estimated
    assert result.recommended is not None
    assert result.recommended.relative_error <= 1e-2
    assert result.rules[0].order == pytest.approx(2.0, abs=0.1)


def test_a_path_without_any_error_has_no_order_and_no_blame():
    path = path_of(
        segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", durations=[100.0], held=HELD)
    )
    result = study(path, 1e-6)
    assert result.holds
    assert result.own.relative < 1e-14
    assert (result.rules[0].order, result.blame) == (None, None)
    assert all(math.isfinite(rung.relative_error) for rung in result.rules[0].errors)
    assert result.recommended is not None
    assert result.recommended.counts == (1, 1)


def test_jumps_alone_are_no_trouble():
    path = path_of(
        segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", durations=[0.0], temperatures=[300.0])
    )
    result = study(path, 1e-3)
    assert result.holds
    assert (result.rules[0].increments_needed, result.blame) == (2, None)


def test_a_path_that_does_nothing_is_no_trouble():
    result = study(path_of(segment("uniaxial strain", value=0.0)), 1e-3)
    assert result.holds
    assert result.own.relative == 0.0


def test_a_rule_without_a_finite_response_falls_short():
    path = path_of(segment("uniaxial stress", durations=[1e3]), mode="uniaxial stress")
    result = study(path, 1e-2, Rule(shift_rule="integrated", recursion="midpoint"), solid((1e-3,), (1.0,)))
    assert not result.holds
    assert (result.own.relative, result.blame) == (math.inf, None)


@pytest.mark.parametrize("tolerance", [0.0, -1e-3, 1e-10, 1.5, math.nan, math.inf])
def test_a_tolerance_out_of_range_is_refused(tolerance):
    with pytest.raises(ParameterError, match=r"`tolerance` must be from 1e-09 to 1 \(got "):
        study(ramp(), tolerance)


def test_a_path_into_the_pole_is_refused():
    with pytest.raises(PoleError):  # T_ref - C2 = 220 K
        study(path_of(segment("uniaxial strain", temperatures=[219.0])), 1e-2)


def test_a_law_that_refuses_is_heard():
    narrow = MeasuredRange(law=solid((1.0,), (0.5,)).shift, low=330.0, high=345.0, outside="refuse")
    with pytest.raises(ShiftRangeError, match="outside the measured range"):
        study(ramp(), 1e-2, material=solid((3.0, 30.0), (0.3, 0.4), narrow))


def test_every_run_is_counted():
    done: list[int] = []
    steps(solid((3.0,), (0.4,)), ramp(), tolerance=1e-3, rule=DEFAULT, rules=[DEFAULT, BACKWARD], progress=done.append)
    assert len(done) > 10
    assert set(done) == {1}
