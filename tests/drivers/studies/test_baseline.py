from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
import pytest

from drivers.baseline_file import Baseline
from drivers.difference import Difference, Where
from drivers.path import MODES, Cycle, Path, Segment
from drivers.studies.baseline import MOST_PROBES, PathVerdict, record_paths, verify, verify_path
from matlib.card import Card, parse_card
from matlib.card_conversion import convert_card
from matlib.errors import FaultyInputError
from matlib.material import Material
from matlib.units import STRESS, TEMPERATURE, TIME
from tests.baselines import few_paths, recorded, sound


@pytest.fixture(scope="module")
def baseline() -> Baseline:
    return recorded()


def straight(label: str = "pull", strain: float = 0.01, T: float | None = None, count: int = 1) -> Segment:
    return Segment(
        label=label,
        durations=np.full(count, 10.0),
        temperatures=None if T is None else np.full(count, T),
        targets=np.tile([strain, 0.0, 0.0, 0.0, 0.0, 0.0], (count, 1)),
        stress_controlled=np.array([False, True, True, False, False, False]),
        held=np.zeros(6, dtype=bool),
        increments=5,
    )


def pull(*parts: Segment | Cycle) -> Path:
    return Path(name="p", mode=MODES["uniaxial stress"], start_temperature=353.15, parts=parts or (straight(),))


def test_a_card_verifies_against_its_own_baseline_without_any_change(baseline: Baseline) -> None:
    verification = verify(sound().material(), baseline)
    assert verification.holds
    assert verification.worst.relative == 0.0


@pytest.mark.parametrize(
    ("law", "options"),
    [
        ("vft", {"T_ref": 298.15, "units": (STRESS["Pa"], TEMPERATURE["K"], TIME["h"])}),
        ("wlf", {"base": "e", "units": (STRESS["psi"], TEMPERATURE["degF"])}),
        ("wlf", {"T_ref": 400.0}),
    ],
)
def test_a_card_in_another_form_reference_or_unit_holds_to_rounding(
    baseline: Baseline, law: str, options: dict[str, Any]
) -> None:
    converted = parse_card(convert_card(sound(), law, **options).tables, "b.card.toml")
    verification = verify(converted.material(), baseline)
    assert verification.holds
    # A thermal path is known to the bound of its reference solutions, which is below 1e-7; all else to rounding.
    assert all(path.relative <= max(path.bound, 1e-11) for path in verification.paths if path.relative is not None)
    assert all(path.bound <= 2e-7 for path in verification.paths)


def test_a_stiffer_card_moves_every_stress_by_just_as_much_and_creep_by_the_reciprocal(baseline: Baseline) -> None:
    verification = verify(sound({"elastic.E": 3090.0}).material(), baseline)
    changes = {path.name: path.relative for path in verification.paths}
    # Linear in the moduli at constant Poisson ratio, so exact but for the bounds of two reference solutions.
    assert changes["relaxation, 60 degC"] == pytest.approx(0.03, abs=1e-9)
    assert changes["clamped cooling"] == pytest.approx(0.03, abs=1e-6)
    assert changes["creep, 85 degC"] == pytest.approx(1.0 - 1.0 / 1.03, abs=1e-9)


def test_each_path_is_judged_by_its_own_tolerance() -> None:
    card, paths = sound(), few_paths(("relaxation, 60 degC", "relaxation, 110 degC"))
    two = Baseline.of(card, record_paths(card.material(), paths, [0.02, 0.005]))
    verification = verify(sound({"elastic.E": 3030.0}).material(), two)
    assert [path.holds for path in verification.paths] == [True, False]
    assert not verification.holds
    assert verification.worst.name == "relaxation, 110 degC"


def test_a_change_just_inside_the_tolerance_holds_and_one_just_outside_does_not(baseline: Baseline) -> None:
    first = baseline.paths[0]
    assert verify_path(sound({"elastic.E": 3029.9}).material(), first).holds
    assert not verify_path(sound({"elastic.E": 3030.1}).material(), first).holds


def test_the_bounds_of_both_solutions_count_against_the_card(baseline: Baseline) -> None:
    at = Where(segment="dwell", time=1.0, temperature=300.0)
    difference = Difference(quantity="stress", component="s11", value=1.0, relative=0.0099, at=at)
    assert PathVerdict(recorded=baseline.paths[0], difference=difference, bound=0.00005).holds
    assert not PathVerdict(recorded=baseline.paths[0], difference=difference, bound=0.0002).holds


def test_a_card_without_a_response_does_not_hold_and_says_why(baseline: Baseline) -> None:
    refusing = sound({"shift.measured": [70.0, 130.0], "shift.outside": "refuse"})
    verification = verify(refusing.material(), baseline)
    verdict = verification.worst
    assert verdict.relative is None
    assert not verdict.holds
    assert verdict.ratio == math.inf
    assert "outside the measured range" in verdict.reason


def test_recording_names_every_path_that_the_card_has_no_response_to() -> None:
    refusing = sound({"shift.measured": [70.0, 130.0], "shift.outside": "refuse"})
    paths = few_paths(("relaxation, 60 degC", "creep, 85 degC", "clamped cooling"))
    with pytest.raises(FaultyInputError) as error:
        record_paths(refusing.material(), paths, [0.01] * 3)
    assert [fault.key for fault in error.value.faults] == ["path 1, 'relaxation, 60 degC'", "path 3, 'clamped cooling'"]


def test_a_tolerance_below_what_is_known_of_the_response_is_refused() -> None:
    with pytest.raises(FaultyInputError, match=r"`tolerance` must be >= .* four times the bound"):
        record_paths(sound().material(), few_paths(("clamped cooling",)), [1e-12])


def test_a_tight_tolerance_is_recorded_to_a_tighter_bound() -> None:
    recorded_path = record_paths(sound().material(), few_paths(("clamped cooling",)), [1e-7])[0]
    verdict = verify_path(sound().material(), recorded_path)
    assert verdict.holds
    assert verdict.bound <= 0.5e-7


def test_a_path_of_too_many_pieces_is_refused() -> None:
    long = pull(Cycle(repeat=300_000, segments=(straight(),)))
    with pytest.raises(FaultyInputError, match="300000"):
        record_paths(sound().material(), [long], [0.01])


def test_a_long_path_keeps_few_probe_points_among_them_the_extremes_and_the_end() -> None:
    cycle = Cycle(repeat=40, segments=(straight("up", 0.01), straight("down", -0.004)))
    one = record_paths(sound().material(), [pull(cycle)], [0.01])[0]
    assert 0.5 * MOST_PROBES <= len(one.rows) <= MOST_PROBES
    assert one.response.time[-1] == pytest.approx(800.0)
    # The peak of the kept rows is the peak of the run.
    assert np.abs(one.response.stress_components).max() == one.response.peak_stress
    assert verify_path(sound().material(), one).relative == 0.0


def test_a_measured_record_is_probed_at_its_own_points() -> None:
    record = pull(straight("record", count=12, T=350.0))
    one = record_paths(sound().material(), [record], [0.01])[0]
    assert len(one.rows) == 13
    assert one.increments == (1,)


def test_a_path_under_components_is_recorded_with_an_estimated_bound() -> None:
    segment = dataclasses.replace(straight(), stress_controlled=np.array([False, True, False, False, False, True]))
    path = Path(name="mask", mode=MODES["components"], start_temperature=353.15, parts=(segment,))
    one = record_paths(sound().material(), [path], [0.01])[0]
    assert one.estimated
    assert verify_path(sound().material(), one).estimated
    assert verify_path(sound().material(), one).holds


def test_probe_points_at_other_times_than_recorded_are_refused(baseline: Baseline) -> None:
    first = baseline.paths[0]
    moved = dataclasses.replace(first.response, time=first.response.time * 1.01)
    for spoiled in (
        dataclasses.replace(first, response=moved),
        dataclasses.replace(first, rows=(*first.rows[:-1], 10_000)),
    ):
        with pytest.raises(FaultyInputError, match="probe points at other times"):
            verify_path(sound().material(), spoiled)


def test_a_response_that_is_zero_throughout_holds() -> None:
    card: Card = sound({"expansion.alpha": 0.0})
    material: Material = card.material()
    idle = pull(straight("idle", strain=0.0))
    one = record_paths(material, [idle], [0.01])[0]
    assert verify_path(material, one).relative == 0.0
