"""Many materials at once: each as it would be alone."""

import dataclasses

import numpy as np
import pytest

from drivers.ensemble import GROUP, GROUP_BLOCK, run_ensemble
from drivers.path import MODES, Cycle, Path, Segment
from drivers.point import ResponseError, drive
from matlib.ensemble import Ensemble
from matlib.errors import ParameterError, ShiftRangeError
from matlib.material import Material
from matlib.packing import AS_GIVEN
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.shift import SHIFT_RULES, WLF, NoShift, Table
from matlib.viscoelastic import LinearViscoelastic


def sampled(count: int, *, most: int = 5) -> list[Material]:
    """Cards with one to `most` shear terms, none or two in bulk, and each its own shift law."""
    rng = np.random.default_rng(7)

    def card(number: int) -> Material:
        terms = 1 + number % most
        shares = rng.uniform(0.5, 1.0, terms)
        shear = PronySeries.from_fractions(1e9, 0.8 * shares / shares.sum(), 10.0 ** rng.uniform(-3.0, 4.0, terms))
        bulk = PronySeries.from_fractions(3e9, [0.1, 0.2], [1.0, 50.0]) if number % 2 else PronySeries.elastic(4e9)
        shift = WLF(C1=14.2 * rng.uniform(0.9, 1.1), C2=161.0, T_ref=353.15)
        return Material(shear=shear, bulk=bulk, shift=shift, expansion=6e-5 * rng.uniform(0.5, 1.5))

    return [card(number) for number in range(count)]


def segment(targets: dict[int, float], controlled: tuple[int, ...], **changes: object) -> Segment:
    row = np.zeros((1, 6))
    for component, value in targets.items():
        row[0, component] = value
    given: dict[str, object] = {
        "label": "load",
        "durations": [10.0],
        "temperatures": None,
        "targets": row,
        "stress_controlled": np.isin(np.arange(6), controlled),
        "held": np.zeros(6, dtype=bool),
        "increments": 9,
    }
    return Segment(**(given | changes))  # type: ignore[arg-type]


def path_of(*parts: Segment | Cycle) -> Path:
    return Path(name="p", mode=MODES["components"], start_temperature=353.15, parts=parts)


TABLE = Table(T=np.array([300.0, 353.15, 400.0]), log10_a=np.array([3.0, 0.0, -2.0]), T_ref=353.15)
PULL = segment({0: 0.01}, (1, 2))
STRAINED = segment({0: 0.01, 4: 0.003}, (), temperatures=[360.0])
CREEP = segment({0: 2e6}, (0, 1, 2))
HOLD = segment({}, (1, 2), held=np.arange(6) == 0, durations=[1e3], temperatures=[345.0], spacing="log")
BACK = segment({0: 0.0}, (0, 1, 2), durations=[1e2])
PATHS = {
    "strains": path_of(STRAINED),
    "uniaxial stress": path_of(PULL, dataclasses.replace(HOLD, label="dwell")),
    "creep, then held where it is": path_of(CREEP, HOLD, BACK),
    "rounds": path_of(Cycle(repeat=3, segments=(CREEP, BACK))),
}


def assert_each_as_alone(materials, path, history, **rules):
    assert len(history) == len(materials)
    for index, material in enumerate(materials):
        alone = drive(LinearViscoelastic(material=material, **rules), path, keep="all")
        kept = np.flatnonzero(np.isin(alone.time, history.time))
        own = history.member(index)
        assert own.segment[1:] == tuple(np.array(alone.segment)[kept][1:])
        # the same arithmetic, but for targets that are put together in another order
        np.testing.assert_allclose(own.stress, alone.stress[kept], rtol=0.0, atol=1e-12 * alone.peak_stress)
        np.testing.assert_allclose(own.strain, alone.strain[kept], rtol=0.0, atol=1e-12 * 0.01)
        np.testing.assert_allclose(own.reduced_time, alone.reduced_time[kept], rtol=1e-13)
        np.testing.assert_array_equal(own.time, alone.time[kept])
        np.testing.assert_array_equal(own.temperature, alone.temperature[kept])
        assert own.peak_stress == pytest.approx(alone.peak_stress, rel=1e-12)


@pytest.mark.parametrize("path", PATHS.values(), ids=PATHS)
def test_each_member_responds_as_it_does_alone(path):
    materials = sampled(5)
    assert_each_as_alone(materials, path, run_ensemble(materials, path, keep="all"))


@pytest.mark.parametrize("name", RECURSIONS)
def test_every_compiled_recursion_is_offered(name):
    materials, rule = sampled(3), SHIFT_RULES["middle"]
    history = run_ensemble(materials, PATHS["strains"], keep="all", recursion=RECURSIONS[name], shift_rule=rule)
    assert_each_as_alone(materials, PATHS["strains"], history, recursion=RECURSIONS[name], shift_rule=rule)


def test_members_of_many_terms_stand_beside_members_of_few():
    materials = sampled(3, most=3) + sampled(1, most=1)
    times = np.logspace(-8.0, 8.0, 40)
    long = PronySeries.from_fractions(1e9, np.full(40, 0.02), times)
    materials[1] = dataclasses.replace(materials[1], shear=long)
    assert_each_as_alone(
        materials, PATHS["uniaxial stress"], run_ensemble(materials, PATHS["uniaxial stress"], keep="all")
    )


@pytest.mark.parametrize("threads", [1, 2, None])
def test_groups_and_blocks_and_threads_make_no_difference(threads):
    materials = sampled(GROUP + 2)
    path = path_of(dataclasses.replace(PULL, increments=GROUP_BLOCK + 3))
    history = run_ensemble(materials, path, keep=GROUP_BLOCK // 2, threads=threads)
    assert history.stress.shape == (GROUP + 2, 1 + 2 + 1, 6)
    for index in (0, 17, 32, 33, GROUP - 1, GROUP, GROUP + 1):
        alone = drive(LinearViscoelastic(material=materials[index]), path, keep=GROUP_BLOCK // 2)
        np.testing.assert_array_equal(history.time, alone.time)
        np.testing.assert_allclose(history.stress[index], alone.stress, rtol=0.0, atol=1e-12 * alone.peak_stress)


def test_ends_are_kept_unless_more_is_asked_for():
    history = run_ensemble(sampled(2), PATHS["creep, then held where it is"])
    assert history.segment == ("start", "load", "load", "load")
    assert history.time.tolist() == [0.0, 10.0, 1010.0, 1110.0]
    assert history.ends.all()


def test_a_law_that_is_shared_is_asked_once():
    asked = []

    def rule(law, dt, T_start, T_end):
        asked.append(law)
        return SHIFT_RULES["integrated"](law, dt, T_start, T_end)

    first = sampled(1)[0]
    dxi = Ensemble([first] * 4, shift_rule=rule).reduced_time(np.ones(2), [350.0, 351.0], [351.0, 352.0])
    assert asked == [first.shift]
    assert np.array_equal(dxi, np.tile(dxi[0], (4, 1)))


def test_a_law_outside_the_family_is_asked_by_itself():
    cards = [dataclasses.replace(card, shift=law) for card, law in zip(sampled(2), (NoShift(), TABLE), strict=True)]
    assert_each_as_alone(cards, PATHS["strains"], run_ensemble(cards, PATHS["strains"], keep="all"))


def test_an_ensemble_of_nobody_is_refused():
    with pytest.raises(ParameterError, match="`materials` must be at least one"):
        run_ensemble([], path_of(PULL))
    with pytest.raises(ParameterError, match="`materials` must be at least one"):
        Ensemble([])


@pytest.mark.parametrize("keep", ["some", 0, 2.5])
def test_keeping_something_else_is_refused(keep):
    with pytest.raises(ParameterError, match="`keep` must be"):
        run_ensemble(sampled(1), path_of(PULL), keep=keep)


def test_no_threads_are_refused():
    with pytest.raises(ParameterError, match="`threads` must be >= 1"):
        run_ensemble(sampled(1), path_of(PULL), threads=0)


def test_a_recursion_without_a_compiled_form_is_refused():
    own = dataclasses.replace(RECURSIONS["midpoint"], name="own", form=AS_GIVEN)
    with pytest.raises(ParameterError, match="`recursion` must be one with a compiled form"):
        run_ensemble(sampled(1), path_of(PULL), recursion=own)


def test_a_path_into_the_pole_of_a_member_is_refused():
    with pytest.raises(ShiftRangeError, match="pole"):
        run_ensemble(sampled(3), path_of(dataclasses.replace(PULL, temperatures=np.array([150.0]))))


def test_a_member_without_a_finite_response_is_named():
    liquid = PronySeries.from_fractions(1e9, [1.0], [1e-3])
    lost = Material(shear=liquid, bulk=PronySeries.elastic(3e9), shift=NoShift())
    with pytest.raises(ResponseError, match=r"segment 'load of member 2'"):
        run_ensemble(
            [*sampled(2), lost],
            path_of(dataclasses.replace(PULL, durations=np.array([1e9]))),
            recursion=RECURSIONS["midpoint"],
        )
