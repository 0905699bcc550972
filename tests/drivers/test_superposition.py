"""Carrying integrals along a path."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers import superposition
from drivers.path import MODES, Path, Segment
from drivers.reference import solve
from drivers.superposition import recurred
from matlib.tensors import mandel_from_strain

EPS = float(np.finfo(np.float64).eps)


@given(n=st.integers(1, 60), m=st.integers(0, 3), c=st.integers(1, 3), seed=st.integers(0, 2**32 - 1))
def test_blocks_side_by_side_give_the_recurrence_taken_step_by_step(n, m, c, seed):
    rng = np.random.default_rng(seed)
    decay, source, start = rng.random((n, m)), rng.standard_normal((n, m, c)), rng.standard_normal((m, c))
    x, size = recurred(decay, source, start)
    assert x.shape == size.shape == (n, m, c)
    state, magnitude = start, np.abs(start)
    for k in range(n):
        state = decay[k][:, np.newaxis] * state + source[k]
        magnitude = decay[k][:, np.newaxis] * magnitude + np.abs(source[k])
        # one rounding a product and a sum, each carried on; all of them decay with what they belong to
        assert np.all(np.abs(x[k] - state) <= 4.0 * EPS * (k + 1) * magnitude)
        assert np.all(size[k] >= np.abs(x[k]) * (1.0 - 4.0 * EPS))


@pytest.mark.parametrize("chunk", [1, 40, 300])
def test_rows_do_not_depend_on_how_many_are_carried_at_once(resin, monkeypatch, chunk):
    row = mandel_from_strain(np.array([0.01, 0.0, 0.002, 0.0, 0.001, 0.0]))
    pull = Segment(
        label="pull",
        durations=[100.0],
        temperatures=[370.0],
        targets=[row],
        stress_controlled=[False] * 6,
        held=[False] * 6,
        increments=23,
    )
    path = Path(name="p", mode=MODES["components"], start_temperature=350.0, parts=(pull, pull))
    whole = solve(resin, path)
    monkeypatch.setattr(superposition, "CHUNK", chunk)
    parts = solve(resin, path)
    assert len(parts.history) == len(whole.history) == 47
    scale = whole.history.peak_stress
    np.testing.assert_allclose(parts.history.stress, whole.history.stress, rtol=0.0, atol=1e-14 * scale)
    np.testing.assert_allclose(parts.history.reduced_time, whole.history.reduced_time, rtol=1e-14)
