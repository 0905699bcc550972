"""Cutting increments, and the clock of the pieces."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.ramp_pieces import Pieces, clock_of, cut_pieces, first_pieces, sums_by_row
from matlib.shift import WLF, MeasuredRange

LAW = WLF(C1=14.2, C2=61.0, T_ref=353.15)


def test_increments_are_cut_at_the_knots_that_they_pass_and_at_no_other():
    T = np.array([300.0, 340.0, 340.0, 310.0, 320.0])
    pieces = first_pieces(T, (290.0, 310.0, 330.0, 340.0))
    assert pieces.row.tolist() == [0, 0, 0, 1, 2, 2, 3]
    np.testing.assert_allclose(pieces.start, [0.0, 0.25, 0.75, 0.0, 0.0, 1.0 / 3.0, 0.0], rtol=1e-15)
    np.testing.assert_allclose(pieces.end, [0.25, 0.75, 1.0, 1.0, 1.0 / 3.0, 1.0, 1.0], rtol=1e-15)


@given(widths=st.lists(st.floats(0.0, 1e3), min_size=1, max_size=8), fair=st.floats(1e-3, 10.0))
def test_only_wide_pieces_are_cut_and_the_parts_fill_them_without_a_gap(widths, fair):
    n = len(widths)
    pieces = Pieces(np.arange(n), np.full(n, 0.25), np.full(n, 1.0))
    cut = cut_pieces(pieces, np.array(widths), fair)
    for k, width in enumerate(widths):
        own = cut.row == k
        assert (own.sum() > 1) == (width > fair)
        assert own.sum() <= 8
        assert (cut.start[own][0], cut.end[own][-1]) == (0.25, 1.0)
        np.testing.assert_array_equal(cut.start[own][1:], cut.end[own][:-1])


@given(counts=st.lists(st.integers(1, 40), min_size=1, max_size=12))
def test_what_follows_a_piece_is_the_rest_of_its_own_increment(counts):
    row = np.repeat(np.arange(len(counts)), counts)
    edges = [np.linspace(0.0, 1.0, count + 1) for count in counts]
    pieces = Pieces(row, np.concatenate([e[:-1] for e in edges]), np.concatenate([e[1:] for e in edges]))
    T = np.linspace(330.0, 380.0, len(counts) + 1)
    clock = clock_of(LAW, np.ones(len(counts)), T, pieces)
    for k in range(len(counts)):
        own = clock.dxi[row == k]
        expected = [own[i + 1 :].sum() for i in range(own.size)]
        np.testing.assert_allclose(clock.after[row == k], expected, rtol=1e-14)  # sums of at most 40 positive numbers
    np.testing.assert_allclose(sums_by_row(row, clock.dxi, len(counts)), np.bincount(row, clock.dxi), rtol=1e-14)


@given(low=st.floats(250.0, 330.0), width=st.floats(1e-3, 90.0), parts=st.integers(2, 60), cools=st.booleans())
def test_no_piece_of_a_ramp_between_the_ends_of_a_refusing_law_leaves_its_range(low, width, parts, cools):
    high = low + width
    law = MeasuredRange(law=WLF(C1=14.2, C2=161.0, T_ref=353.15), low=low, high=high, outside="refuse")
    edges = np.arange(parts + 1) / parts
    pieces = Pieces(np.zeros(parts, dtype=np.int64), edges[:-1], edges[1:])
    T = np.array([high, low] if cools else [low, high])
    clock = clock_of(law, np.ones(1), T, pieces)
    assert clock.ordered
    assert clock.dxi.sum() == pytest.approx(
        float(law.mean_rate(low, high)), rel=1e-11
    )  # roundings of T times its slope
