"""The one loop: each mode against Hooke's law, what is kept, whose routine it is, how control can fail."""

import numpy as np
import pytest

from drivers.path import BLOCK_LIMIT, MODES, Cycle, Path, Segment
from drivers.point import ControlError, ResponseError, drive, march
from matlib.arrays import FloatArray
from matlib.errors import ParameterError, ShiftRangeError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.routine import Increment, Routine, Update
from matlib.shift import NoShift
from matlib.tensors import isotropic_stiffness
from matlib.viscoelastic import LinearViscoelastic

G, K = 1.2e9, 2.0e9  # Pa; E = 3 GPa, nu = 0.25
E, NU, LAME = 3.0e9, 0.25, 1.2e9
ELASTIC = Material(shear=PronySeries.elastic(G), bulk=PronySeries.elastic(K), shift=NoShift(), expansion=1e-5)
STRAIN = 0.01


def segment(mode: str, *, by: str = "strain", value: float = STRAIN, **changes: object) -> Segment:
    """One segment of a named mode."""
    driven, free = list(MODES[mode].driven), list(MODES[mode].free)
    controlled, targets = np.zeros(6, dtype=bool), np.zeros((1, 6))
    controlled[free] = True
    controlled[driven] = by == "stress"
    targets[0, driven] = value
    given: dict[str, object] = {
        "label": "pull",
        "durations": [1.0],
        "temperatures": None,
        "targets": targets,
        "stress_controlled": controlled,
        "held": np.zeros(6, dtype=bool),
        "increments": 4,
    }
    return Segment(**(given | changes))  # type: ignore[arg-type]


def path_of(*parts: Segment | Cycle, mode: str = "uniaxial stress", T: float = 300.0) -> Path:
    """Parts of one mode."""
    return Path(name="p", mode=MODES[mode], start_temperature=T, parts=parts)


def elastic() -> LinearViscoelastic:
    return LinearViscoelastic(material=ELASTIC)


@pytest.mark.parametrize("stepwise", [False, True])
@pytest.mark.parametrize(
    ("mode", "stress", "strain"),
    [  # Hooke's law (textbook), per unit of the driven strain; shear is engineering strain
        ("uniaxial stress", [E, 0, 0, 0, 0, 0], [1, -NU, -NU, 0, 0, 0]),
        ("uniaxial strain", [LAME + 2 * G, LAME, LAME, 0, 0, 0], [1, 0, 0, 0, 0, 0]),
        ("equibiaxial stress", [E / (1 - NU)] * 2 + [0] * 4, [1, 1, -2 * NU / (1 - NU), 0, 0, 0]),
        ("plane strain tension", [E / (1 - NU**2), NU * E / (1 - NU**2), 0, 0, 0, 0], [1, 0, -NU / (1 - NU), 0, 0, 0]),
        ("hydrostatic", [3 * K] * 3 + [0] * 3, [1, 1, 1, 0, 0, 0]),
    ],
)
def test_an_elastic_point_obeys_hookes_law_in_every_mode(mode, stress, strain, stepwise):
    h = drive(elastic(), path_of(segment(mode), mode=mode), stepwise=stepwise)
    # a few roundings of moduli of the same size
    np.testing.assert_allclose(h.stress_components[-1], STRAIN * np.array(stress), rtol=1e-14, atol=1e-14 * E * STRAIN)
    np.testing.assert_allclose(h.strain_components[-1], STRAIN * np.array(strain), rtol=1e-14, atol=1e-15)


@pytest.mark.parametrize("stepwise", [False, True])
def test_simple_shear_answers_with_the_shear_modulus(stepwise):
    shear = segment("simple shear", value=STRAIN / np.sqrt(2.0))  # Mandel form of an engineering shear strain
    h = drive(elastic(), path_of(shear, mode="simple shear"), stepwise=stepwise)
    np.testing.assert_allclose(h.stress_components[-1], [0, 0, 0, 0, 0, G * STRAIN], rtol=1e-14)
    np.testing.assert_allclose(h.strain_components[-1], [0, 0, 0, 0, 0, STRAIN], rtol=1e-15)


@pytest.mark.parametrize("stepwise", [False, True])
def test_a_clamped_point_that_is_cooled_is_pulled_by_its_expansion(stepwise):
    hold = segment("uniaxial strain", value=0.0, temperatures=[200.0])
    h = drive(elastic(), path_of(hold, mode="uniaxial strain"), stepwise=stepwise)
    np.testing.assert_allclose(h.stress_components[-1], np.array([1, 1, 1, 0, 0, 0]) * 3 * K * 1e-5 * 100.0, rtol=1e-13)


def test_a_free_point_that_is_cooled_shrinks_without_stress():
    free = segment("hydrostatic", by="stress", value=0.0, temperatures=[200.0])
    h = drive(elastic(), path_of(free, mode="hydrostatic"))
    np.testing.assert_allclose(h.strain_components[-1], np.array([1, 1, 1, 0, 0, 0]) * -1e-5 * 100.0, rtol=1e-13)
    assert h.peak_stress <= 1e-14 * 3 * K * 1e-5 * 100.0


@pytest.mark.parametrize("stepwise", [False, True])
def test_a_strain_jump_is_answered_with_the_instantaneous_moduli(resin, stepwise):
    jump = segment("uniaxial strain", durations=[0.0])
    h = drive(LinearViscoelastic(material=resin), path_of(jump, mode="uniaxial strain"), stepwise=stepwise)
    expected = resin.bulk.instantaneous + 4.0 / 3.0 * resin.shear.instantaneous
    np.testing.assert_allclose(h.stress_components[-1, 0], expected * STRAIN, rtol=1e-14)
    assert len(h) == 2
    assert h.time.tolist() == [0.0, 0.0]


def test_a_temperature_jump_passes_no_reduced_time_and_without_expansion_changes_no_stress(resin):
    material = Material(shear=resin.shear, bulk=resin.bulk, shift=resin.shift)
    pull, heat = segment("uniaxial strain"), segment("uniaxial strain", durations=[0.0], temperatures=[390.0])
    h = drive(LinearViscoelastic(material=material), path_of(pull, heat, mode="uniaxial strain", T=353.15))
    assert h.reduced_time is not None
    assert h.reduced_time[-1] == h.reduced_time[-2] > 0.0
    np.testing.assert_array_equal(h.stress[-1], h.stress[-2])
    assert h.temperature[-1] == 390.0


def test_a_step_relaxes_as_the_series_says(resin):
    step, hold = (
        segment("simple shear", durations=[0.0]),
        segment("simple shear", durations=[1e6], increments=50, spacing="log"),
    )
    h = drive(LinearViscoelastic(material=resin), path_of(step, hold, mode="simple shear", T=353.15))
    dwell = h.time[1:]  # at T_ref reduced time is time
    np.testing.assert_allclose(
        h.stress[1:, 5], 2.0 * resin.shear.relaxation(dwell) * STRAIN, rtol=1e-12
    )  # 50 roundings
    np.testing.assert_allclose(h.reduced_time, h.time, rtol=1e-13)


def test_stress_control_reaches_its_stress_and_holds_it(resin):
    load = segment("uniaxial stress", by="stress", value=3e6, durations=[0.0])
    creep = segment("uniaxial stress", by="stress", value=3e6, durations=[1e5], held=np.arange(6) == 0, spacing="log")
    h = drive(LinearViscoelastic(material=resin), path_of(load, creep, T=353.15))
    np.testing.assert_allclose(h.stress[1:, 0], 3e6, rtol=1e-13)
    assert np.all(np.diff(h.strain[:, 0]) > 0.0)


def test_a_path_of_many_blocks_has_every_increment_once():
    count = 2 * BLOCK_LIMIT + 3
    h = drive(elastic(), path_of(segment("uniaxial stress", increments=count, temperatures=[400.0])))
    assert len(h) == count + 1
    np.testing.assert_allclose(h.time, np.arange(count + 1) / count, atol=1e-15)
    np.testing.assert_allclose(h.strain[:, 0], STRAIN * np.arange(count + 1) / count, rtol=1e-14, atol=1e-18)
    np.testing.assert_allclose(h.temperature, 300.0 + 100.0 * np.arange(count + 1) / count, rtol=1e-14)


def kept(keep: str | int) -> list[float]:
    """Times kept of 3 rounds of segments of 4 and 3 increments of 1 s."""
    parts = Cycle(
        repeat=3,
        segments=(
            segment("uniaxial stress", durations=[4.0]),
            segment("uniaxial stress", durations=[3.0], increments=3),
        ),
    )
    h = drive(elastic(), path_of(parts), keep=keep)
    assert h.ends is not None
    assert h.time[h.ends].tolist() == [0.0, 4.0, 7.0, 11.0, 14.0, 18.0, 21.0]
    assert len(h.segment) == h.strain.shape[0] == h.stress.shape[0] == h.temperature.size == h.time.size
    return h.time.tolist()


def test_all_rows_are_kept_or_the_ends_or_every_nth_and_the_ends():
    assert kept("all") == list(range(22))
    assert kept("ends") == [0, 4, 7, 11, 14, 18, 21]
    assert kept(5) == [0, 4, 5, 7, 10, 11, 14, 15, 18, 20, 21]


def test_rows_that_are_kept_do_not_depend_on_how_many(resin):
    routine = LinearViscoelastic(material=resin)
    path = path_of(segment("uniaxial stress", increments=3 * BLOCK_LIMIT), T=353.15)
    everything, ends = drive(routine, path), drive(routine, path, keep="ends")
    np.testing.assert_array_equal(ends.stress[-1], everything.stress[-1])
    assert ends.reduced_time is not None
    assert everything.reduced_time is not None
    assert ends.reduced_time[-1] == everything.reduced_time[-1]


@pytest.mark.parametrize("keep", ["some", 0, -3, 2.5])
def test_keeping_something_else_is_refused(keep):
    with pytest.raises(ParameterError, match=r'`keep` must be "all", "ends" or an integer >= 1'):
        drive(elastic(), path_of(segment("uniaxial stress")), keep=keep)


def test_the_peak_counts_increments_that_are_not_kept():
    up, down = segment("uniaxial stress"), segment("uniaxial stress", value=0.0)
    both = Segment(
        label="up and down",
        durations=np.ones(2),
        temperatures=None,
        targets=np.concatenate([up.targets, down.targets]),
        stress_controlled=up.stress_controlled,
        held=up.held,
        increments=10,
    )
    h = drive(elastic(), path_of(both), keep="ends")
    np.testing.assert_allclose(h.peak_stress, E * STRAIN, rtol=1e-14)
    assert abs(h.stress[-1, 0]) < 1e-14 * E


def test_progress_counts_every_increment_once():
    done: list[int] = []
    path = path_of(Cycle(repeat=2, segments=(segment("uniaxial stress", increments=BLOCK_LIMIT + 1),)))
    drive(elastic(), path, keep="ends", progress=done.append)
    assert sum(done) == path.increment_count


def test_labels_carry_the_round_of_a_cycle():
    h = drive(elastic(), path_of(Cycle(repeat=2, segments=(segment("uniaxial stress", increments=1),))))
    assert h.segment == ("start", "pull (1)", "pull (2)")


def test_a_path_into_the_pole_is_refused_with_the_temperature(resin):
    cold = segment("uniaxial stress", temperatures=[280.0])
    with pytest.raises(ShiftRangeError, match=r"shift law wlf: .*pole"):
        drive(LinearViscoelastic(material=resin), path_of(cold, T=353.15))


class Plain(Routine):
    """An elastic routine with nothing but `update`, its answer and tangent scaled at will."""

    def __init__(self, stress: float = 1.0, tangent: float = 1.0, power: int = 1) -> None:
        self.stress, self.tangent, self.power = stress, tangent, power
        self.C = isotropic_stiffness(G, K)

    @property
    def memory_size(self) -> int:
        return 0

    def update(self, increment: Increment, memory: FloatArray) -> Update:
        strain = increment.strain[1]
        linear = self.C @ strain
        if not np.isfinite(self.stress):
            return Update(np.full(6, self.stress), self.C, memory)
        if self.power == 1:
            return Update(self.stress * linear, self.tangent * self.C, memory)
        size = 1.0 + 1e4 * float(strain @ strain)  # stiffens: stress = (1 + 1e4 |e|^2) C e
        return Update(size * linear, size * self.C + 2e4 * np.outer(linear, strain), memory)


def test_any_routine_is_driven_and_one_without_a_clock_has_no_reduced_time():
    h = drive(Plain(), path_of(segment("uniaxial stress")))
    np.testing.assert_allclose(
        h.stress_components[-1], [E * STRAIN, 0, 0, 0, 0, 0], rtol=1e-13, atol=1e-13 * E * STRAIN
    )
    assert h.reduced_time is None


def test_free_components_of_a_nonlinear_routine_are_found_by_its_tangent():
    routine = Plain(power=3)
    h = drive(routine, path_of(segment("uniaxial stress", by="stress", value=1e8)))
    e = h.strain[-1]
    stress = (1.0 + 1e4 * float(e @ e)) * (routine.C @ e)
    np.testing.assert_allclose(stress, [1e8, 0, 0, 0, 0, 0], atol=1e-12 * 1e8 * 10)  # Newton's tolerance
    assert 0.0 < e[0] < 1e8 / E  # stiffer than the linear solid


def test_a_tangent_of_the_wrong_sign_is_told_with_the_time_of_the_increment():
    with pytest.raises(ControlError, match="look at the routine's tangent") as caught:
        drive(Plain(tangent=-1.0), path_of(segment("uniaxial stress")))
    assert caught.value.time == 0.0
    assert caught.value.residual > 0.0


def test_a_tangent_of_zeros_is_told_as_well():
    with pytest.raises(ControlError, match="did not converge"):
        drive(Plain(tangent=0.0), path_of(segment("uniaxial stress")))


@pytest.mark.parametrize("mode", ["uniaxial stress", "uniaxial strain"])
@pytest.mark.parametrize("wrong", [np.nan, np.inf])
def test_a_stress_that_is_not_finite_ends_the_run_with_its_segment_and_time(mode, wrong):
    with pytest.raises(ResponseError, match="no finite response in segment 'pull'") as caught:
        drive(Plain(stress=wrong), path_of(segment(mode), mode=mode))
    assert (caught.value.segment, caught.value.time) == ("pull", 0.0)


def test_a_liquid_whose_stiffness_is_lost_in_an_increment_ends_the_run(resin):
    liquid = Material(shear=PronySeries.from_fractions(1e9, [1.0], [1e-3]), bulk=resin.bulk, shift=NoShift())
    routine = LinearViscoelastic(material=liquid, recursion=RECURSIONS["midpoint"])  # its gain underflows at large r
    with pytest.raises(ResponseError, match="the stiffness there is zero"):
        drive(routine, path_of(segment("uniaxial stress", durations=[1e9])))


@pytest.mark.parametrize("long", [1e6, 1e-2])
def test_recovery_after_creep_is_found_increment_by_increment_as_well(resin, long):
    load = segment("uniaxial stress", by="stress", value=3e6, durations=[1e3], increments=20)
    unload = segment("uniaxial stress", by="stress", value=0.0, durations=[0.0])
    rest = segment("uniaxial stress", by="stress", value=0.0, durations=[long], increments=200)
    routine, path = LinearViscoelastic(material=resin), path_of(load, unload, rest, T=353.15)
    slow, fast = drive(routine, path, stepwise=True), drive(routine, path)
    # rounding of stresses that cancel, over the softest modulus, which is a tenth of the stiffest
    np.testing.assert_allclose(slow.strain, fast.strain, rtol=0, atol=1e-13 * np.abs(fast.strain).max())


def test_the_march_yields_blocks_that_join(resin):
    path = path_of(segment("uniaxial stress", increments=BLOCK_LIMIT + 5), T=353.15)
    first, second = march(LinearViscoelastic(material=resin), path)
    assert first.time[-1] < second.time[0]
    assert (first.ends_segment, second.ends_segment) == (False, True)
