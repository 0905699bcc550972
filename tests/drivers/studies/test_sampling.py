"""Chosen increment ends of a long run: the same load, at rows of that run."""

import numpy as np
import pytest

from drivers.path import Path
from drivers.reference import solve
from drivers.studies.sampling import FEWEST, kept_ends, sampled
from tests.drivers.studies.step_cases import draw_case, path_of, segment


@pytest.mark.parametrize("seed", range(12))
def test_the_solution_at_chosen_ends_is_that_of_the_whole_run_there(seed):
    case = draw_case(seed)
    path = case.path.with_increments(200)
    sample = sampled(path, 100)
    assert sample is not None
    whole, chosen = (solve(case.material, one, accuracy=1e-6) for one in (path, sample.path))
    there = whole.history.taken(sample.rows)
    assert len(there) == len(chosen.history) < len(whole.history) / 2
    np.testing.assert_array_equal(there.temperature, chosen.history.temperature)
    # A time of a late segment is a sum of roundings.
    np.testing.assert_allclose(there.time, chosen.history.time, rtol=1e-13)
    bounds = whole.relative_bound + chosen.relative_bound
    for a, b in (
        (there.stress_components, chosen.history.stress_components),
        (there.strain_components, chosen.history.strain_components),
    ):
        assert np.abs(a - b).max() <= bounds * np.abs(a).max()


@pytest.mark.parametrize("count", [1, 7, 8, 9, 100, 4096, 200_000])
@pytest.mark.parametrize("budget", [8, 9, 64, 129])
def test_ends_that_are_kept_begin_with_the_first_and_end_with_the_last(count, budget):
    kept = kept_ends(count, budget)
    assert (kept[0], kept[-1]) == (1, count)
    assert np.all(np.diff(kept) > 0)
    assert kept.size == count if count <= budget else kept.size <= budget
    assert np.diff(kept).max(initial=0) <= -(-count // (budget // 2))


def test_a_path_with_more_pieces_than_the_budget_keeps_some_ends_of_each():
    durations = np.full(100, 2.0)
    record = segment("uniaxial strain", durations=durations, targets=np.zeros((100, 6)), increments=50)
    sample = sampled(path_of(record), 10)
    assert sample is not None
    assert FEWEST * 100 * 0.5 < sample.rows.size - 1 <= FEWEST * 100
    assert set(range(0, 5001, 50)) <= set(sample.rows.tolist())


def test_a_path_where_control_changes_is_not_sampled():
    parts = segment("uniaxial stress"), segment("uniaxial stress", by="stress", value=0.0)
    assert sampled(path_of(*parts, mode="uniaxial stress"), 100) is None


def test_jumps_are_kept_as_they_are():
    path: Path = path_of(segment("uniaxial strain", durations=[0.0]), segment("uniaxial strain", increments=1000))
    sample = sampled(path, 20)
    assert sample is not None
    assert sample.path.segments[0].duration == 0.0
    assert sample.rows[:3].tolist() == [0, 1, 2]
