"""What every response must obey, whatever the material and the path."""

import dataclasses
import math
import tracemalloc
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.history import History
from drivers.path import MODES, Cycle, Path, Segment, fractions
from drivers.point import drive
from matlib.arrays import BoolArray, FloatArray
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.shift import NoShift
from matlib.shift.reduced_time import SHIFT_RULES
from matlib.tensors import rotation
from matlib.viscoelastic import LinearViscoelastic
from tests.strategies import COLD, HOT, control_masks, decades, materials, paths, segments

FREE = np.zeros(6, dtype=bool)
few = settings(max_examples=60)


def scales(material: Material, *histories: History) -> tuple[float, float]:
    """Stress and strain that rounding errors are fractions of.

    The stress is the stiffest modulus times the largest strain, thermal strain included, because responses may cancel.
    Strains that are found from a stress inherit its rounding divided by the softest modulus.
    """
    stiff = material.bulk.instantaneous + 4.0 / 3.0 * material.shear.instantaneous
    soft = min(material.shear.equilibrium, material.bulk.equilibrium)
    strain = max(float(np.abs(h.strain).max()) for h in histories) + 3.0 * material.expansion * (HOT - COLD)
    stress = stiff * strain + max(h.peak_stress for h in histories)
    return stress, stress / soft


def assert_same(material: Material, first: History, second: History, rounding: float = 1e-12) -> None:
    """Two responses are equal but for `rounding`, a few hundred roundings unless stated otherwise."""
    stress, strain = scales(material, first, second)
    np.testing.assert_allclose(second.stress, first.stress, rtol=0, atol=rounding * stress)
    np.testing.assert_allclose(second.strain, first.strain, rtol=0, atol=rounding * strain)


def changed(path: Path, change: Callable[[int, Segment], Segment]) -> Path:
    """Same path, each distinct segment changed; `change` gets its number and itself."""
    numbers = iter(range(len(path.segments)))

    def of(part: Segment | Cycle) -> Segment | Cycle:
        if isinstance(part, Segment):
            return change(next(numbers), part)
        return dataclasses.replace(part, segments=tuple(change(next(numbers), s) for s in part.segments))

    return dataclasses.replace(path, parts=tuple(of(part) for part in path.parts))


def times(path: Path, factors: FloatArray) -> Path:
    """Same path, the targets of each segment times a factor of its own."""
    return changed(path, lambda k, s: dataclasses.replace(s, targets=s.targets * factors[k]))


def durations(path: Path) -> FloatArray:
    """Lengths of all increments [s]; differences of times would lose those of short ones that come late."""
    return np.concatenate(
        [
            fractions(s.increments if s.duration else 1, s.spacing, 0, s.increment_count)[1] * s.duration
            for _, _, s in path.unrolled()
        ]
    )


def sampled(path: Path, lengths: FloatArray, h: History, targets: FloatArray, controlled: BoolArray) -> Path:
    """One segment that goes straight from row to row of `h`."""
    segment = Segment(
        label="sampled",
        durations=lengths,
        temperatures=h.temperature[1:],
        targets=targets[1:],
        stress_controlled=controlled,
        held=FREE,
        increments=1,
    )
    return dataclasses.replace(path, parts=(segment,))


@given(
    material=materials(),
    path=paths(),
    recursion=st.sampled_from(sorted(RECURSIONS)),
    rule=st.sampled_from(sorted(SHIFT_RULES)),
)
@settings(max_examples=150)
def test_the_fast_lane_and_the_stepwise_lane_are_equal_to_rounding(material, path, recursion, rule):
    routine = LinearViscoelastic(material=material, recursion=RECURSIONS[recursion], shift_rule=SHIFT_RULES[rule])
    fast, slow = drive(routine, path), drive(routine, path, stepwise=True)
    assert_same(material, fast, slow)
    assert fast.segment == slow.segment
    np.testing.assert_array_equal(fast.reduced_time, slow.reduced_time)


@given(material=materials(), path=paths(), data=st.data())
@few
def test_responses_add_up_apart_from_the_thermal_one_that_both_share(material, path, data):
    count, routine = len(path.segments), LinearViscoelastic(material=material)
    factors = np.array(
        data.draw(st.lists(st.floats(-3.0, 3.0).map(lambda x: round(x, 9)), min_size=count, max_size=count))
    )
    none = drive(routine, times(path, np.zeros(count)))
    one, other = drive(routine, path), drive(routine, times(path, factors))
    both = drive(routine, times(path, 1.0 + factors))
    added = dataclasses.replace(
        both, stress=one.stress + other.stress - none.stress, strain=one.strain + other.strain - none.strain
    )
    assert_same(material, added, both)


@given(path=paths(), data=st.data())
@few
def test_a_segment_at_another_temperature_is_one_of_another_duration_at_the_reference(path, data):
    material = dataclasses.replace(data.draw(materials()), expansion=0.0)
    law, T_ref = material.shift, material.shift.T_ref

    def isothermal(_: int, s: Segment) -> Segment:
        return dataclasses.replace(s, temperatures=None)

    def at_reference(_: int, s: Segment) -> Segment:
        return dataclasses.replace(s, durations=s.durations * rate, temperatures=None)

    rate = float(np.exp(-law.ln_shift(path.start_temperature) + law.ln_shift(T_ref)))
    routine = LinearViscoelastic(material=material)
    there = drive(routine, changed(path, isothermal))
    here = drive(routine, dataclasses.replace(changed(path, at_reference), start_temperature=T_ref))
    # reduced time carries a relative rounding of |ln a_T| eps, and increments a rounding each
    assert_same(material, here, there, rounding=1e-11)


@given(material=materials(), path=paths())
@few
def test_only_reduced_time_counts_whatever_the_temperature_does(material, path):
    routine = LinearViscoelastic(material=material)
    h = drive(routine, path)
    assert h.reduced_time is not None
    clock = routine.reduced_time(durations(path), h.temperature[:-1], h.temperature[1:])
    unshifted = dataclasses.replace(material, shift=NoShift())
    again = drive(LinearViscoelastic(material=unshifted), sampled(path, clock, h, h.strain, FREE))
    assert_same(material, h, again)


@given(material=materials(), one=segments(FREE, tuple(range(6))), other=segments(FREE, tuple(range(6))), data=st.data())
@few
def test_a_rotated_strain_is_answered_with_the_rotated_stress(material, one, other, data):
    q = np.array(data.draw(st.lists(st.floats(-1.0, 1.0), min_size=9, max_size=9))).reshape(3, 3) + 2.0 * np.eye(3)
    Q = rotation(np.linalg.qr(q)[0])  # orthogonal, reflections included
    path = Path(name="p", mode=MODES["components"], start_temperature=COLD + 50.0, parts=(one, other))
    turned = changed(path, lambda _, s: dataclasses.replace(s, targets=s.targets @ Q.T))
    routine = LinearViscoelastic(material=material)
    here, there = drive(routine, path), drive(routine, turned)
    assert_same(material, dataclasses.replace(here, stress=here.stress @ Q.T, strain=here.strain @ Q.T), there)


@given(material=materials(), path=paths(), mask=control_masks())
@few
def test_the_stress_of_a_strain_path_fed_back_gives_its_strain(material, path, mask):
    routine = LinearViscoelastic(material=material)
    h, lengths = drive(routine, path), durations(path)
    by_strain = drive(routine, sampled(path, lengths, h, h.strain, FREE))
    targets = np.where(mask, by_strain.stress, by_strain.strain)
    by_stress = drive(routine, sampled(path, lengths, h, targets, mask))
    assert_same(material, by_strain, by_stress)


@given(
    material=materials(), path=paths(modes=("uniaxial strain", "simple shear", "hydrostatic")), factor=st.integers(2, 5)
)
@few
def test_finer_increments_change_nothing_where_strain_is_given_and_temperature_stands(material, path, factor):
    isothermal = changed(path, lambda _, s: dataclasses.replace(s, temperatures=None, stress_controlled=FREE))
    small = (
        times(isothermal, np.full(len(path.segments), 1e-2)) if path.segments[0].stress_controlled.any() else isothermal
    )
    routine = LinearViscoelastic(material=material)
    coarse, fine = drive(routine, small, keep="ends"), drive(routine, small.refined(factor), keep="ends")
    assert_same(material, coarse, fine)


@given(material=materials(), path=paths(), recursion=st.sampled_from(sorted(RECURSIONS)))
@few
def test_two_half_segments_are_one_whole_segment_of_the_same_increments(material, path, recursion):
    def halves(segment: Segment) -> tuple[Segment, ...]:
        if segment.duration == 0.0:
            return (segment,)
        even = dataclasses.replace(segment, spacing="even")
        return tuple(dataclasses.replace(even, label=f"{k}", durations=segment.durations / 2.0) for k in range(2))

    # halfway only where start and end are known: one segment from the unloaded start
    first = path.segments[0]
    whole = dataclasses.replace(first, spacing="even", increments=2 * first.increments)
    two = halves(first)
    if len(two) == 2:
        T0, T1 = path.start_temperature, first.temperatures
        middle = None if T1 is None else 0.5 * (T0 + T1)
        target = np.where(first.held, 0.0, 0.5 * first.targets)
        two = (dataclasses.replace(two[0], targets=target, temperatures=middle), two[1])
    routine = LinearViscoelastic(material=material, recursion=RECURSIONS[recursion])
    one = drive(routine, dataclasses.replace(path, parts=(whole,)), keep="ends")
    cut = drive(routine, dataclasses.replace(path, parts=two), keep="ends")
    last = slice(-1, None)
    assert_same(
        material,
        dataclasses.replace(one, stress=one.stress[last], strain=one.strain[last]),
        dataclasses.replace(cut, stress=cut.stress[last], strain=cut.strain[last]),
    )


def work(h: History) -> float:
    """Work done on the point a volume [J/m3], by the trapezoidal rule."""
    return float(np.sum(0.5 * (h.stress[1:] + h.stress[:-1]) * np.diff(h.strain, axis=0)))


@given(
    material=materials(max_terms=3),
    legs=st.lists(segments(FREE, tuple(range(6))), min_size=1, max_size=3),
    T=st.floats(COLD, HOT),
)
@few
def test_no_energy_comes_out_of_a_closed_strain_cycle_from_rest(material, legs, T):
    cold = dataclasses.replace(material, expansion=0.0)  # thermal strain does work of its own
    back = dataclasses.replace(
        legs[0], targets=np.zeros((1, 6)), held=FREE, durations=np.array([max(legs[0].duration, 1e-3)])
    )
    legs = [dataclasses.replace(leg, spacing="even", increments=40) for leg in [*legs, back]]
    path = Path(name="p", mode=MODES["components"], start_temperature=T, parts=tuple(legs))
    coarse, fine = (drive(LinearViscoelastic(material=cold), p) for p in (path, path.refined(2)))
    stress, _ = scales(cold, fine)
    error = abs(work(fine) - work(coarse))  # of the trapezoidal rule; that of `fine` is smaller
    assert work(fine) >= -error - 1e-12 * stress * float(np.abs(fine.strain).max())


@given(tau=decades(-2, 2), modulus=decades(6, 9))
@settings(max_examples=10)
def test_a_steady_shear_cycle_dissipates_what_the_loss_modulus_says(tau, modulus):
    series = PronySeries(equilibrium=modulus, moduli=np.array([0.5, 1.0]) * modulus, times=np.array([1.0, 3.0]) * tau)
    material = Material(shear=series, bulk=PronySeries.elastic(modulus), shift=NoShift())
    omega, n, rounds, amplitude = 1.0 / tau, 800, 8, 0.01  # after 8 rounds the start is forgotten to exp(-16 pi / 3)
    t = np.arange(rounds * n + 1) * (2.0 * math.pi / omega / n)
    targets = np.zeros((t.size - 1, 6))
    targets[:, 5] = amplitude * np.sin(
        omega * t[1:]
    )  # Mandel: sqrt 2 e12, so that the work is 2 G e e as for G gamma^2
    segment = Segment(
        label="sine",
        durations=np.diff(t),
        temperatures=None,
        targets=targets,
        stress_controlled=FREE,
        held=FREE,
        increments=1,
    )
    h = drive(
        LinearViscoelastic(material=material),
        Path(name="p", mode=MODES["simple shear"], start_temperature=300.0, parts=(segment,)),
    )
    last = dataclasses.replace(h, stress=h.stress[-n - 1 :], strain=h.strain[-n - 1 :])
    expected = math.pi * 2.0 * float(series.loss(omega)) * amplitude**2  # textbook: pi G'' gamma0^2
    assert work(last) == pytest.approx(expected, rel=1e-4)  # sine by 800 chords: (2 pi / 800)^2 / 6 = 1e-5


def peak_memory(count: int) -> int:
    """Largest memory in use while a path of so many increments is driven [byte]."""
    shear = PronySeries.from_fractions(1e9, [0.3, 0.3], [1.0, 10.0])
    material = Material(shear=shear, bulk=PronySeries.elastic(2e9), shift=NoShift())
    segment = Segment(
        label="pull", durations=np.ones(1), temperatures=np.array([310.0]), targets=0.01 * np.eye(6)[:1],
        stress_controlled=FREE, held=FREE, increments=count,
    )  # fmt: skip
    path = Path(name="p", mode=MODES["uniaxial strain"], start_temperature=300.0, parts=(segment,))
    routine = LinearViscoelastic(material=material)
    drive(routine, path.with_increments(10), keep="ends")
    tracemalloc.start()
    try:
        drive(routine, path, keep="ends")
        return tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()


def test_memory_does_not_grow_with_the_increments_where_only_ends_are_kept():
    short, long = peak_memory(10_000), peak_memory(1_000_000)
    assert long < 1.1 * short
