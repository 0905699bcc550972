"""The estimate under general control, against a much finer run of the routine."""

import numpy as np
import pytest

from drivers.path import MODES, Path, Segment
from drivers.point import drive
from drivers.reference import solve
from drivers.refinement import refined_solution
from matlib.tensors import mandel_from_strain, mandel_from_stress
from matlib.viscoelastic import LinearViscoelastic

FREE_SIDES = [False, True, True, False, False, False]
ALL_BY_STRESS = [False] * 6
BY_STRESS = [True, True, True, False, False, False]


def segment(duration, row, controlled, *, T=None, increments=10, spacing="even", label="s") -> Segment:
    """Named components: stress where controlled, strain elsewhere."""
    mandel = np.where(controlled, mandel_from_stress(np.array(row)), mandel_from_strain(np.array(row)))
    return Segment(
        label=label,
        durations=[duration],
        temperatures=None if T is None else [T],
        targets=[mandel],
        stress_controlled=controlled,
        held=[False] * 6,
        increments=increments,
        spacing=spacing,
    )


def path_of(mode: str, *segments: Segment) -> Path:
    return Path(name="p", mode=MODES[mode], start_temperature=353.15, parts=segments)


PATHS = {
    "a general mask": path_of(
        "components",
        segment(10.0, [0.01, 0.0, 0.0, 0.0, 0.0, 0.002], FREE_SIDES),
        segment(100.0, [0.01, 2e6, 0.0, 0.0, 0.0, 0.002], FREE_SIDES, T=363.15),
        segment(1000.0, [0.005, 0.0, 1e6, 0.001, 0.0, 0.0], FREE_SIDES, T=333.15),
    ),
    "pulled by strain, let go by stress": path_of(
        "uniaxial stress",
        segment(10.0, [0.01, 0.0, 0.0, 0.0, 0.0, 0.0], FREE_SIDES),
        segment(100.0, [0.0] * 6, BY_STRESS, T=363.15),
        segment(1000.0, [0.0] * 6, BY_STRESS, T=333.15),
    ),
    "creep, then held": path_of(
        "uniaxial stress",
        segment(0.0, [5e6, 0.0, 0.0, 0.0, 0.0, 0.0], BY_STRESS, increments=1),
        segment(100.0, [5e6, 0.0, 0.0, 0.0, 0.0, 0.0], BY_STRESS, increments=40, spacing="log"),
        segment(100.0, [0.004, 0.0, 0.0, 0.0, 0.0, 0.0], FREE_SIDES, T=345.0),
    ),
    "a jump with coarse increments after it": path_of(
        "components",
        segment(0.0, [0.01, 0.0, 0.0, 0.0, 0.0, 0.0], [False, True, False, False, False, False]),
        segment(100.0, [0.01, 0.0, 0.0, 0.0, 0.0, 0.0], [False, True, False, False, False, False], increments=20),
    ),
}


def differences(history, fine, name):
    """Largest difference of any component, a row of `history` but the start; of two rows at one time, a jump's, the last."""
    rows = [np.flatnonzero(np.isclose(fine.time, t, rtol=1e-12, atol=0.0))[-1] for t in history.time[1:]]
    return np.abs(getattr(history, name)[1:] - getattr(fine, name)[rows]).max(axis=1)


@pytest.mark.parametrize("accuracy", [1e-4, 1e-6])
@pytest.mark.parametrize("path", PATHS.values(), ids=PATHS.keys())
def test_the_estimate_holds_the_error_against_a_much_finer_run(resin, path, accuracy):
    reference = solve(resin, path, accuracy=accuracy)
    history = reference.history
    assert reference.estimated
    assert history.bound is not None
    # 4096 times the increments: several times more than the finest run that the estimate may take, which is of second order
    fine = drive(LinearViscoelastic(material=resin), path.refined(4096))
    assert np.all(differences(history, fine, "stress_components") <= history.bound[1:])
    assert np.all(differences(history, fine, "strain_components") <= reference.strain_bound[1:])
    assert reference.relative_bound <= 20.0 * accuracy  # coarse increments after a jump resolve slowly


@pytest.mark.parametrize("name", ["a general mask", "pulled by strain, let go by stress"])
def test_estimates_from_few_and_many_increments_agree_within_their_bounds(resin, name):
    path = PATHS[name]
    few, many = (solve(resin, path.with_increments(n), accuracy=1e-5) for n in (5, 100))
    rows = np.arange(0, len(many.history), 20)
    slack = few.history.bound + many.history.bound[rows]
    assert np.all(np.abs(few.history.stress_components - many.history.stress_components[rows]).max(axis=1) <= slack)


def test_control_by_strain_alone_is_estimated_as_it_is_solved(resin):
    row = [0.01, -0.003, 0.002, 0.001, 0.004, -0.002]
    path = path_of(
        "components", segment(10.0, row, ALL_BY_STRESS, T=360.0), segment(100.0, [0.0] * 6, ALL_BY_STRESS, T=340.0)
    )
    exact, estimate = solve(resin, path), refined_solution(resin, path, 1e-6)
    difference = np.abs(exact.history.stress_components - estimate.history.stress_components).max(axis=1)
    assert not exact.estimated
    assert np.all(difference <= exact.history.bound + estimate.history.bound)
    assert estimate.history.bound.max() <= 1e-6 * estimate.history.peak_stress


def test_rows_and_segment_ends_are_those_of_the_path(resin):
    path = PATHS["creep, then held"]
    history, driven = solve(resin, path, accuracy=1e-3).history, drive(LinearViscoelastic(material=resin), path)
    assert history.segment == driven.segment
    np.testing.assert_array_equal(history.ends, driven.ends)
    np.testing.assert_allclose(history.time, driven.time, rtol=1e-13)
    np.testing.assert_allclose(history.temperature, driven.temperature, rtol=1e-15)
    np.testing.assert_allclose(history.reduced_time, driven.reduced_time, rtol=1e-9)


def test_nothing_driven_is_estimated_as_nothing(resin):
    path = path_of("components", segment(10.0, [0.0] * 6, FREE_SIDES))
    reference = solve(resin, path)
    assert np.all(reference.history.stress == 0.0)
    assert reference.relative_bound == 0.0
