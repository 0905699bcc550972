"""The largest difference of two responses, and the rows that two runs share."""

import numpy as np
import pytest

from drivers.difference import largest_difference, shared_rows
from drivers.history import History
from drivers.point import drive
from matlib.viscoelastic import LinearViscoelastic
from tests.drivers.studies.step_cases import draw_case, path_of, segment


def history(stress: list[float], strain: list[float] | None = None) -> History:
    """Rows with s22 and e22 only, one second and one kelvin apart, in segments a, b, ..."""
    n = len(stress)
    six = np.zeros((2, n, 6))
    six[0, :, 1] = stress
    six[1, :, 1] = np.zeros(n) if strain is None else strain
    return History(
        segment=tuple("abcdefgh"[:n]),
        time=np.arange(n, dtype=float),
        temperature=300.0 + np.arange(n),
        reduced_time=None,
        strain=six[1],
        stress=six[0],
        peak_stress=float(np.abs(six[0]).max()),
    )


def test_the_largest_difference_is_told_with_its_place_and_as_a_part_of_the_first_peak():
    found = largest_difference(history([0.0, 8e6, -2e6]), history([0.0, 8.2e6, -1e6]))
    assert (found.quantity, found.component, found.value, found.relative) == ("stress", "s22", 1e6, 0.125)
    assert (found.at.segment, found.at.time, found.at.temperature) == ("c", 2.0, 302.0)


def test_strain_is_told_where_it_differs_more_as_a_part_of_its_own_peak():
    found = largest_difference(history([0.0, 1e6], [0.0, 0.01]), history([0.0, 1.1e6], [0.0, 0.012]))
    assert (found.quantity, found.component) == ("strain", "e22")
    assert found.relative == pytest.approx(0.2, rel=1e-12)  # a subtraction of two doubles


def test_equal_responses_differ_by_nothing_at_the_start():
    found = largest_difference(history([0.0, 1e6]), history([0.0, 1e6]))
    assert (found.value, found.relative, found.at.segment, found.at.time) == (0.0, 0.0, "a", 0.0)


def test_two_responses_of_nothing_differ_by_nothing():
    assert largest_difference(history([0.0, 0.0]), history([0.0, 0.0])).relative == 0.0


def test_a_response_where_there_should_be_none_is_measured_by_itself():
    assert largest_difference(history([0.0, 0.0]), history([0.0, -3.0])).relative == 1.0


def test_a_stress_that_is_rounding_is_not_compared():
    rounding, strain = history([0.0, 1e-9], [0.0, 0.01]), history([0.0, 2e-9], [0.0, 0.01])
    assert largest_difference(rounding, strain).relative == 1.0
    assert largest_difference(rounding, strain, negligible_stress=1e-6).relative == 0.0


@pytest.mark.parametrize("wrong", [np.nan, np.inf])
def test_what_is_no_number_is_infinitely_far(wrong):
    for a, b in (([0.0, 1e6, 1e6], [0.0, wrong, 1e6]), ([0.0, wrong, 1e6], [0.0, 1e6, 1e6])):
        found = largest_difference(history(a), history(b))
        assert (found.relative, found.at.segment) == (np.inf, "b")


@pytest.mark.parametrize("seed", range(12))
def test_shared_rows_stand_at_the_same_time_and_temperature_in_both_runs(seed):
    case = draw_case(seed)
    rng = np.random.default_rng(seed)
    n = len(case.path.segments)
    counts = [tuple(int(k) for k in rng.choice([1, 2, 3, 4, 6, 12], n)) for _ in range(2)]
    routine = LinearViscoelastic(material=case.material)
    a, b = (drive(routine, case.path.with_increments(c)) for c in counts)
    rows_a, rows_b = shared_rows(case.path, *counts)
    assert rows_a.size == rows_b.size
    # each end time is one product and one sum of doubles
    np.testing.assert_allclose(a.time[rows_a], b.time[rows_b], rtol=1e-14)
    np.testing.assert_allclose(a.temperature[rows_a], b.temperature[rows_b], rtol=1e-14)
    assert [a.segment[k] for k in rows_a] == [b.segment[k] for k in rows_b]


@pytest.mark.parametrize("seed", range(12))
def test_rows_are_shared_as_often_as_both_counts_can_be_divided(seed):
    path = draw_case(seed).path
    n = len(path.segments)
    rows, _ = shared_rows(path, (12,) * n, (18,) * n)
    assert rows.size == 1 + path.with_increments(6).increment_count
    rows, own = shared_rows(path, (12,) * n, (12,) * n)
    assert rows.tolist() == own.tolist() == list(range(1 + path.with_increments(12).increment_count))


def test_a_path_of_jumps_shares_every_row_whatever_the_counts():
    jumps = path_of(segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", durations=[0.0]))
    assert [rows.tolist() for rows in shared_rows(jumps, (3, 5), (7, 1))] == [[0, 1, 2], [0, 1, 2]]


def test_pieces_of_a_record_share_the_rows_inside_each_of_them():
    record = segment("uniaxial strain", durations=[1.0, 0.0, 2.0], targets=np.zeros((3, 6)))
    assert [rows.tolist() for rows in shared_rows(path_of(record), (2,), (4,))] == [
        [0, 1, 2, 3, 4, 5],
        [0, 2, 4, 5, 7, 9],
    ]
