"""Paths: cycles, counts, blocks of increments, and where increments end."""

import itertools
import math
import time

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.path import MODES, Cycle, Path, Segment, find_mode, fractions, segment_blocks
from matlib.errors import ParameterError, UnknownNameError


def pull(label: str = "pull", **changes: object) -> Segment:
    """A segment that moves e11 to 0.01 in 10 s."""
    given_keys: dict[str, object] = {
        "label": label,
        "durations": [10.0],
        "temperatures": None,
        "targets": [[0.01, 0.0, 0.0, 0.0, 0.0, 0.0]],
        "stress_controlled": [False] * 6,
        "held": [False] * 6,
        "increments": 5,
    }
    return Segment(**(given_keys | changes))  # type: ignore[arg-type]


def path_of(*parts: Segment | Cycle) -> Path:
    """Parts that start at 300 K."""
    return Path(name="p", mode=MODES["uniaxial strain"], start_temperature=300.0, parts=parts)


def test_every_mode_drives_and_frees_different_components():
    for mode in MODES.values():
        assert not set(mode.driven) & set(mode.free)
        assert all(0 <= c <= 5 for c in mode.driven + mode.free)
        assert find_mode(mode.name) is mode


def test_an_unknown_mode_lists_the_known_ones():
    with pytest.raises(UnknownNameError, match=r"unknown mode 'biaxial': use one of uniaxial stress, .*components"):
        find_mode("biaxial")


@pytest.mark.parametrize(
    ("changes", "name"),
    [
        ({"durations": [-1.0]}, "duration"),
        ({"durations": [math.nan]}, "duration"),
        ({"durations": [math.inf]}, "duration"),
        ({"durations": []}, "duration"),
        ({"targets": [[0.0] * 5]}, "targets"),
        ({"targets": [[math.nan] + [0.0] * 5]}, "targets"),
        ({"targets": [[0.0] * 6, [0.0] * 6]}, "targets"),
        ({"temperatures": [0.0]}, "temperature"),
        ({"temperatures": [300.0, 301.0]}, "temperature"),
        ({"temperatures": [math.nan]}, "temperature"),
        ({"increments": 0}, "increments"),
    ],
)
def test_a_segment_refuses_what_no_path_can_do(changes, name):
    with pytest.raises(ParameterError) as caught:
        pull(**changes)
    assert caught.value.name == name


def test_an_unknown_spacing_lists_the_known_ones():
    with pytest.raises(UnknownNameError, match="unknown spacing 'cubic': use one of even, log"):
        pull(spacing="cubic")


def test_a_segment_keeps_its_arrays_read_only():
    segment = pull(temperatures=[310.0])
    for array in (segment.durations, segment.temperatures, segment.targets, segment.stress_controlled, segment.held):
        assert array is not None
        assert not array.flags.writeable


def test_a_cycle_runs_at_least_once_and_is_not_empty():
    with pytest.raises(ParameterError, match="`repeat` must be >= 1"):
        Cycle(repeat=0, segments=(pull(),))
    with pytest.raises(ParameterError, match="`segments` must be at least one segment"):
        Cycle(repeat=2, segments=())


def test_a_path_is_not_empty_and_starts_above_absolute_zero():
    with pytest.raises(ParameterError, match="`parts` must be at least one segment"):
        path_of()
    with pytest.raises(ParameterError, match="`start_temperature` must be finite and > 0 K"):
        Path(name="p", mode=MODES["hydrostatic"], start_temperature=0.0, parts=(pull(),))


def test_cycles_are_unrolled_in_order_and_keep_the_numbers_of_their_segments():
    path = path_of(pull("a"), Cycle(repeat=2, segments=(pull("b"), pull("c"))), pull("d"))
    assert [(number, label) for number, label, _ in path.unrolled()] == [
        (0, "a"), (1, "b (1)"), (2, "c (1)"), (1, "b (2)"), (2, "c (2)"), (3, "d"),
    ]  # fmt: skip
    assert [segment.label for segment in path.segments] == ["a", "b", "c", "d"]


def test_counts_and_durations_follow_from_the_unrolled_segments():
    jump = pull("jump", durations=[0.0], increments=50)
    path = path_of(
        jump, Cycle(repeat=7, segments=(pull("b"), pull("c", durations=[2.5, 0.0, 1.5], targets=[[0] * 6] * 3)))
    )
    unrolled = [segment for _, _, segment in path.unrolled()]
    assert path.increment_count == sum(segment.increment_count for segment in unrolled) == 1 + 7 * (5 + 11)
    assert path.duration == math.fsum(segment.duration for segment in unrolled) == 7 * 14.0


def test_counting_does_not_walk_through_the_rounds_of_a_cycle():
    path = path_of(Cycle(repeat=10**12, segments=(pull(),)))
    started = time.perf_counter()
    assert path.increment_count == 5 * 10**12
    assert path.duration == 1e13
    assert time.perf_counter() - started < 1.0  # s; a walk would take days


def test_the_temperature_range_spans_start_and_segments():
    path = path_of(pull(temperatures=[250.0]), Cycle(repeat=2, segments=(pull(temperatures=[320.0]), pull())))
    assert path.temperature_range == (250.0, 320.0)
    assert path_of(pull()).temperature_range == (300.0, 300.0)


def test_increments_are_changed_one_by_one_or_all_at_once_and_nothing_else():
    path = path_of(pull("a"), Cycle(repeat=3, segments=(pull("b", increments=7), pull("c"))))
    assert [s.increments for s in path.with_increments(9).segments] == [9, 9, 9]
    changed = path.with_increments((1, 2, 3))
    assert [s.increments for s in changed.segments] == [1, 2, 3]
    assert [s.increments for s in path.refined(4).segments] == [20, 28, 20]
    assert changed.duration == path.duration
    assert [label for _, label, _ in changed.unrolled()] == [label for _, label, _ in path.unrolled()]
    with pytest.raises(ParameterError, match="one for each of 3 segments"):
        path.with_increments((1, 2))


@given(count=st.integers(1, 5000), spacing=st.sampled_from(["even", "log"]))
def test_increments_fill_their_piece_without_gap_or_overlap(count, spacing):
    ends, lengths = fractions(count, spacing, 0, count)
    assert ends[-1] == 1.0
    assert np.all(lengths > 0.0)
    # Sums of lengths against ends: each end is rounded once, each of the sums `count` times.
    np.testing.assert_allclose(np.cumsum(lengths), ends, rtol=2e-16 * (count + 20))


@given(count=st.integers(2, 3000), data=st.data(), spacing=st.sampled_from(["even", "log"]))
def test_a_part_of_the_increments_is_cut_from_the_whole(count, data, spacing):
    start = data.draw(st.integers(0, count - 1))
    stop = data.draw(st.integers(start + 1, count))
    whole, part = fractions(count, spacing, 0, count), fractions(count, spacing, start, stop)
    np.testing.assert_array_equal(part[0], whole[0][start:stop])
    np.testing.assert_array_equal(part[1], whole[1][start:stop])


@pytest.mark.parametrize("spacing", ["even", "log"])
def test_doubling_the_increments_halves_every_one_of_them(spacing):
    coarse, fine = fractions(40, spacing, 0, 40)[0], fractions(80, spacing, 0, 80)[0]
    np.testing.assert_allclose(fine[1::2], coarse, rtol=1e-14)  # a few roundings


def test_log_spacing_grows_by_a_constant_factor_of_a_million_in_the_whole():
    _, lengths = fractions(1000, "log", 0, 1000)
    np.testing.assert_allclose(
        lengths[1:] / lengths[:-1], 1e6 ** (1 / 1000), rtol=1e-12
    )  # each a quotient of exponentials


def blocks_of(segment: Segment, limit: int) -> list:
    """Blocks from 5 s, 300 K and a strain e11 of 0.002."""
    return list(segment_blocks(segment, 5.0, 300.0, np.array([0.002, 0, 0, 0, 0, 0]), limit))


@given(limit=st.integers(1, 40), increments=st.integers(1, 30), spacing=st.sampled_from(["even", "log"]))
def test_blocks_of_any_size_make_the_same_increments(limit, increments, spacing):
    segment = pull(
        durations=[10.0, 0.0, 3.0],
        temperatures=[320.0, 310.0, 310.0],
        targets=[[0.01] + [0.0] * 5, [0.03] + [0.0] * 5, [-0.01] + [0.0] * 5],
        increments=increments,
        spacing=spacing,
    )
    whole, cut = blocks_of(segment, 10**6), blocks_of(segment, limit)
    assert len(whole) == 1
    assert sum(block.duration.size for block in cut) == segment.increment_count == 2 * increments + 1
    for name in ("time", "time_end", "duration", "targets"):
        np.testing.assert_array_equal(np.concatenate([getattr(b, name) for b in cut]), getattr(whole[0], name))
    np.testing.assert_array_equal(
        np.concatenate([[300.0], *(block.temperature[1:] for block in cut)]), whole[0].temperature
    )
    for before, after in itertools.pairwise(cut):
        assert before.temperature[-1] == after.temperature[0]


def test_a_block_moves_straight_from_where_it_starts_to_its_targets():
    (block,) = blocks_of(pull(temperatures=[350.0]), 100)
    np.testing.assert_allclose(block.time, 5.0 + np.array([0.0, 2.0, 4.0, 6.0, 8.0]), rtol=1e-15)
    np.testing.assert_allclose(block.temperature, [300.0, 310.0, 320.0, 330.0, 340.0, 350.0], rtol=1e-15)
    np.testing.assert_allclose(block.targets[:, 0], [0.0036, 0.0052, 0.0068, 0.0084, 0.01], rtol=1e-14)
    assert block.targets[-1, 0] == 0.01  # exactly: a hold after it stands still
    assert block.temperature[-1] == 350.0


@given(
    start=st.floats(0.0, 1e9), durations=st.lists(st.floats(0.0, 1e3), min_size=1, max_size=4), n=st.integers(1, 300)
)
def test_time_never_runs_backwards_and_ends_where_it_should(start, durations, n):
    count = len(durations)
    segment = pull(durations=durations, targets=np.zeros((count, 6)), increments=n, spacing="log")
    blocks = list(segment_blocks(segment, start, 300.0, np.zeros(6), 7))
    time = np.concatenate([[start], *(block.time_end for block in blocks)])
    assert np.all(np.diff(time) >= 0.0)
    np.testing.assert_array_equal(np.concatenate([block.time for block in blocks]), time[:-1])
    expected = start
    for duration in durations:
        expected += duration
    assert time[-1] == expected


def test_what_is_held_stays_at_its_value_and_a_missing_temperature_is_held():
    (block,) = blocks_of(pull(held=[True] + [False] * 5), 100)
    np.testing.assert_array_equal(block.targets[:, 0], 0.002)
    np.testing.assert_array_equal(block.temperature, 300.0)


def test_a_jump_is_one_increment_of_no_duration_whatever_was_asked():
    (block,) = blocks_of(pull(durations=[0.0], increments=1000, temperatures=[350.0]), 100)
    assert block.duration.tolist() == [0.0]
    assert block.temperature.tolist() == [300.0, 350.0]
    assert block.targets[:, 0].tolist() == [0.01]
