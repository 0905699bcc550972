"""The patch test: a linear displacement of the boundary strains every point of a distorted mesh alike, whatever its elements."""

import numpy as np
import pytest

from drivers.path import MODES, Path, Segment
from drivers.point import drive
from tests.model.meshes import PATCHES
from tests.model.model import Model

TEMPERATURES = [353.15, 353.15, 338.15, 368.15, 363.15]  # K, at the start and at the end of each segment
DURATIONS = [0.0, 2.0, 500.0, 30.0]  # s
LEVELS = [0.4, 1.0, -0.5, -0.5]  # of the displacement gradient, at the end of each segment
INCREMENTS = 3


def gradient(d):
    """A displacement gradient with nothing special about it [-]."""
    return 0.004 * np.random.default_rng(3).uniform(-1.0, 1.0, (d, d))


def mandel_of(H):
    e = np.zeros((3, 3))
    e[: len(H), : len(H)] = 0.5 * (H + H.T)
    return np.array([e[0, 0], e[1, 1], e[2, 2], *(np.sqrt(2.0) * np.array([e[1, 2], e[0, 2], e[0, 1]]))])


def increments():
    """Duration, temperature and level at the end of each increment."""
    level = 0.0
    for k, duration in enumerate(DURATIONS):
        count = INCREMENTS if duration else 1
        T = TEMPERATURES[k : k + 2]
        for i in range(1, count + 1):
            yield duration / count, T[0] + (T[1] - T[0]) * i / count, level + (LEVELS[k] - level) * i / count
        level = LEVELS[k]


def at_a_point(routine, strain):
    """Stress of one point on the same strain path, a row an increment end."""
    parts = tuple(
        Segment(
            label=str(k),
            durations=[duration],
            temperatures=[TEMPERATURES[k + 1]],
            targets=[LEVELS[k] * strain],
            stress_controlled=[False] * 6,
            held=[False] * 6,
            increments=INCREMENTS,
        )
        for k, duration in enumerate(DURATIONS)
    )
    path = Path(name="patch", mode=MODES["components"], start_temperature=TEMPERATURES[0], parts=parts)
    return drive(routine, path, stepwise=True).stress[1:]


@pytest.mark.parametrize("patch", PATCHES)
def test_every_point_of_a_distorted_mesh_answers_as_a_single_point_does(routine_for, resin, patch):
    routine, basis = routine_for(resin), PATCHES[patch]()
    H = gradient(basis.mesh.dim())
    expected, strain = at_a_point(routine, mandel_of(H)), mandel_of(H)
    linear = np.empty(basis.N)
    for i in range(len(H)):
        dofs = basis.get_dofs(elements=True).all(f"u^{i + 1}")
        linear[dofs] = H[i] @ basis.doflocs[:, dofs]
    model = Model(routine=routine, basis=basis, fixed=basis.get_dofs().all())
    inside = np.setdiff1d(np.arange(basis.N), model.fixed)
    assert inside.size
    state = model.at_rest(TEMPERATURES[0])
    largest, before = np.abs(expected).max(), 0.0
    for k, (duration, temperature, level) in enumerate(increments()):
        state = model.take(state, duration, temperature, level * linear[model.fixed], 0.0)
        # Rounding: sums of some hundred numbers, each to 1e-16, and a linear solve.
        np.testing.assert_allclose(state.strain, np.tile(level * strain, (len(state.strain), 1)), atol=1e-13 * 0.004)
        np.testing.assert_allclose(state.stress, np.tile(expected[k], (len(state.strain), 1)), atol=1e-12 * largest)
        forces = model.forces(state.stress)
        assert np.abs(forces[inside]).max() <= 1e-12 * np.abs(forces).max()
        assert state.corrections == (0 if level == before else 1), state.residuals
        before = level
    assert k + 1 == len(expected)
