"""The reference solution, against 30 digits on any card and path."""

import subprocess
import sys
import time
from dataclasses import dataclass
from fractions import Fraction

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.path import MODES, Cycle, Path, Segment
from drivers.reference import has_closed_response, solve
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import WLF, NoShift
from matlib.tensors import mandel_from_strain, mandel_from_stress
from tests.exact.laws import LAWS
from tests.exact.response import ExactResponse
from tests.strategies import COLD, HOT, decades, fractions_and_times, shift_laws

CASES = 50  # random cards and paths of one run
TRUTH = 1e-16  # of the peak: nested quadrature stops at 1e-17 of a ramp


def segment(
    mode: str,
    duration: float,
    value: float | list[float] | None = None,
    *,
    T: float | None = None,
    by_stress: bool = False,
    increments: int = 1,
    label: str = "s",
    spacing: str = "even",
) -> Segment:
    """One straight segment; the driven components are held where no value is given."""
    driven = list(MODES[mode].driven) or list(range(6))
    row, controlled, held = np.zeros(6), np.zeros(6, dtype=bool), np.zeros(6, dtype=bool)
    controlled[list(MODES[mode].free)] = True
    controlled[driven] = by_stress
    held[driven] = value is None
    if value is not None:
        row[driven] = value
    return Segment(
        label=label,
        durations=[duration],
        temperatures=None if T is None else [T],
        targets=[mandel_from_stress(row) if by_stress else mandel_from_strain(row)],
        stress_controlled=controlled,
        held=held,
        increments=increments,
        spacing=spacing,
    )


def path_of(mode: str, T: float, *parts: Segment | Cycle) -> Path:
    return Path(name="p", mode=MODES[mode], start_temperature=T, parts=parts)


@st.composite
def relaxations(draw, terms: int, modulus: float, *, melts: bool) -> PronySeries:
    """Up to `terms` terms over eight decades of time; a liquid relaxes to nothing."""
    shares, tau = draw(fractions_and_times(1 if melts else 0, terms, 0.95, (-4, 4)))
    series = PronySeries.from_fractions(modulus, shares, tau)
    return PronySeries(equilibrium=0.0, moduli=series.moduli, times=series.times) if melts else series


@st.composite
def cases(draw) -> tuple[Material, Path]:
    """Solids and liquids of every shift law, on two to four ramps, holds and jumps in any mode and control.

    Temperatures are whole millikelvins and inputs whole millionths of a part of the largest, so that nothing driven is
    smaller than what rounding leaves of something else.
    """
    shear = draw(relaxations(3, draw(decades(6, 9.5)), melts=draw(st.booleans())))
    bulk = draw(relaxations(2, shear.instantaneous * draw(st.floats(0.7, 50.0)), melts=False))
    alpha = draw(st.sampled_from([0.0, 1.2e-5, 6.8e-5]))
    material = Material(shear=shear, bulk=bulk, shift=draw(shift_laws()), expansion=alpha)
    mode = draw(st.sampled_from(list(MODES)))
    by_stress = bool(MODES[mode].driven) and draw(st.booleans())
    temperatures = st.integers(round(1e3 * COLD), round(1e3 * HOT)).map(lambda milli: milli / 1e3)
    largest = 0.01 * shear.instantaneous if by_stress else 0.01
    values = st.integers(-1_000_000, 1_000_000).map(lambda part: largest * part / 1e6)
    inputs = values if MODES[mode].driven else st.lists(values, min_size=6, max_size=6)
    segments = [
        segment(
            mode,
            draw(st.one_of(st.just(0.0), decades(-6, 8), decades(-6, 8))),
            draw(st.one_of(st.none(), inputs, inputs)),
            T=draw(st.one_of(st.none(), temperatures, temperatures)),
            by_stress=by_stress,
            increments=draw(st.integers(1, 3)),
        )
        for _ in range(draw(st.integers(2, 4)))
    ]
    return material, path_of(mode, draw(temperatures), *segments)


@dataclass
class Figures:
    """The largest of everything over all cases so far."""

    cases: int = 0
    seconds: float = 0.0
    bound: float = 0.0
    error: float = 0.0
    of_bound: float = 0.0

    def __str__(self) -> str:
        return (
            f"{self.cases} cases: largest bound {self.bound:.1e} and error {self.error:.1e} of the peak, "
            f"error {self.of_bound:.2f} of its bound, longest solve {self.seconds:.2f} s"
        )


def judge(material: Material, path: Path, figures: Figures) -> None:
    """Hold every row and component against 30 digits."""
    began = time.process_time()
    reference = solve(material, path)
    seconds = time.process_time() - began
    assert not reference.estimated
    assert reference.relative_bound <= 1e-6
    figures.cases += 1
    figures.seconds = max(figures.seconds, seconds)
    figures.bound = max(figures.bound, reference.relative_bound)
    truth = ExactResponse(material, path).rows()
    history = reference.history
    for quantity, values, bounds in (
        ("strain", history.strain_components, reference.strain_bound),
        ("stress", history.stress_components, history.bound),
    ):
        peak = float(np.abs(values).max())
        for k, row in enumerate(truth, start=1):
            for component in range(6):
                error = abs(mp.mpf(float(values[k, component])) - row.get((quantity, component), mp.mpf(0)))
                assert error <= bounds[k] + TRUTH * peak, (quantity, component, k)
                assert error <= 1e-9 * peak, (quantity, component, k)
                if peak > 0.0:
                    figures.error = max(figures.error, float(error) / peak)
                if bounds[k] > TRUTH * peak:
                    figures.of_bound = max(figures.of_bound, float(error) / float(bounds[k]))


def test_the_exact_response_of_any_card_and_path_lies_within_the_bound_of_every_row():
    figures = Figures()

    @settings(max_examples=CASES)
    @given(case=cases())
    def run(case: tuple[Material, Path]) -> None:
        judge(*case, figures)

    run()
    print(f"\n{figures}")
    assert figures.error > 0.0


@pytest.mark.parametrize("law", LAWS.values(), ids=LAWS.keys())
def test_every_mode_and_control_on_heating_cooling_jumping_and_holding_lies_within_the_bound(law):
    """Ordinary numbers, where `hypothesis` seeks the odd ones: solids and liquids in turn, 1e-6 s to 1e8 s in one path."""
    figures, rng = Figures(), np.random.default_rng(20)
    for case, mode in enumerate(MODES):
        by_stress = bool(MODES[mode].driven) and (case + len(law.name)) % 2 == 0
        liquid = case % 3 == 0
        times = 10.0 ** np.sort(rng.uniform(-3.0, 4.0, 3))
        shear = PronySeries.from_fractions(1e9, [0.2, 0.4, 0.3], times)
        material = Material(
            shear=PronySeries(equilibrium=0.0, moduli=shear.moduli, times=shear.times) if liquid else shear,
            bulk=PronySeries.from_fractions(3e9, [0.15, 0.25], times[:2] * 3.0),
            shift=law,
            expansion=6e-5,
        )
        size = 1e7 if by_stress else 0.01
        parts = [
            segment(mode, duration, size * rng.uniform(-1.0, 1.0), T=T, by_stress=by_stress, increments=2)
            for duration, T in (
                (1e-6, None),
                (10.0 ** rng.uniform(0.0, 3.0), rng.uniform(360.0, 390.0)),
                (0.0, rng.uniform(350.0, 390.0)),
                (10.0 ** rng.uniform(0.0, 4.0), rng.uniform(320.0, 350.0)),
                (1e8, None),
            )
        ]
        judge(material, path_of(mode, 345.0, *parts), figures)
    print(f"\n{law.name}: {figures}")


MELT = Material(
    shear=PronySeries(equilibrium=0.0, moduli=[2e6, 5e5], times=[0.3, 40.0]),
    bulk=PronySeries.elastic(3e9),
    shift=WLF(C1=14.2, C2=61.0, T_ref=353.15),
    expansion=2e-4,
)


@pytest.mark.parametrize("mode", [name for name in MODES if name != "components"])
def test_a_liquid_creeps_through_heating_and_cooling_as_30_digits_say(mode):
    parts = (
        segment(mode, 0.0, 1e3, by_stress=True),
        segment(mode, 200.0, T=370.0, by_stress=True, increments=2),
        segment(mode, 500.0, -5e2, T=330.0, by_stress=True, increments=2),
        segment(mode, 1e5, by_stress=True),
    )
    judge(MELT, path_of(mode, 350.0, *parts), Figures())


def test_a_viscous_liquid_under_constant_stress_counts_the_clock():
    """One Maxwell term in shear: strain is sigma (1/G + xi/eta), with the clock from the exponential integral."""
    G, tau, stress = 2e6, 5.0, 1e3
    law = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    material = Material(
        shear=PronySeries(equilibrium=0.0, moduli=[G], times=[tau]), bulk=PronySeries.elastic(1e9), shift=law
    )
    mode = "simple shear"
    parts = segment(mode, 0.0, stress, by_stress=True), segment(mode, 10.0, T=383.15, by_stress=True)
    reference = solve(material, path_of(mode, 373.15, *parts))
    xi = 1172.28241257462  # published table of reduced times: this law, 10 K at 1 K/s (computed)
    assert reference.history.strain_components[-1, 5] == pytest.approx(stress / G * (1.0 + xi / tau), rel=1e-9)
    assert reference.relative_bound <= 1e-9


def relaxing(mode: str) -> Path:
    return path_of(
        mode,
        360.0,
        segment(mode, 0.0, 0.005, label="step"),
        segment(mode, 300.0, T=375.0, label="heat"),
        segment(mode, 600.0, -0.004, T=335.0, label="cool"),
        segment(mode, 1e4, label="dwell", spacing="log"),
    )


@pytest.mark.parametrize("mode", list(MODES))
def test_the_solution_at_shared_times_does_not_depend_on_the_increments_of_the_path(resin, mode):
    few, many = (solve(resin, relaxing(mode).with_increments(n)) for n in (10, 1000))
    rows = [0, 1, *(1 + 100 * k for k in range(1, 31))]
    np.testing.assert_allclose(many.history.time[rows], few.history.time, rtol=1e-12)
    for name, slack in (
        ("stress_components", few.history.bound + many.history.bound[rows]),
        ("strain_components", few.strain_bound + many.strain_bound[rows]),
    ):
        difference = np.abs(getattr(few.history, name) - getattr(many.history, name)[rows]).max(axis=1)
        assert np.all(difference <= slack)
    assert not few.estimated
    assert not many.estimated
    assert max(few.relative_bound, many.relative_bound) <= 1e-9


def test_a_tighter_accuracy_is_reached_and_agrees(resin):
    path = relaxing("uniaxial stress")
    for accuracy in (1e-4, 1e-6, 1e-10):
        reference, other = solve(resin, path, accuracy=accuracy), solve(resin, path)
        assert reference.relative_bound <= accuracy
        difference = np.abs(reference.history.stress - other.history.stress).max(axis=1)
        assert np.all(difference <= reference.history.bound + other.history.bound)


def test_where_rounding_alone_is_larger_than_the_accuracy_the_solver_stops_there(resin):
    """Near the pole ln a_T is known to few digits, which no cutting mends."""
    material = Material(shear=resin.shear, bulk=resin.bulk, shift=WLF(C1=14.2, C2=61.0, T_ref=353.15))
    mode = "uniaxial stress"
    path = path_of(mode, 330.0, segment(mode, 1.0, 0.01), segment(mode, 1e4, T=292.1501), segment(mode, 10.0, T=400.0))
    reference = solve(material, path, accuracy=1e-11)
    assert 1e-13 < reference.relative_bound < 1e-9


@pytest.mark.parametrize("accuracy", [0.0, 1e-12, 0.1, float("nan")])
def test_an_accuracy_out_of_reach_is_refused(resin, accuracy):
    with pytest.raises(ParameterError, match="accuracy"):
        solve(resin, relaxing("hydrostatic"), accuracy=accuracy)


def test_an_elastic_material_without_terms_is_answered_exactly():
    material = Material(
        shear=PronySeries.elastic(1e9), bulk=PronySeries.elastic(2e9), shift=NoShift(T_ref=300.0), expansion=1e-5
    )
    mode = "uniaxial stress"
    reference = solve(material, path_of(mode, 300.0, segment(mode, 5.0, 0.01, T=320.0, increments=4)))
    young = 9.0 * 2e9 * 1e9 / (3.0 * 2e9 + 1e9)
    assert reference.history.stress_components[-1, 0] == pytest.approx(young * (0.01 - 1e-5 * 20.0), rel=1e-14)
    assert reference.relative_bound < 1e-12


def test_an_input_that_passes_zero_is_known_to_the_rounding_of_what_it_passes_from(resin):
    mode = "uniaxial strain"
    parts = segment(mode, 0.0, 0.01), segment(mode, 5.0, -0.02, increments=3)
    reference = solve(resin, path_of(mode, 350.0, *parts))
    exact = Fraction(0.01) + (Fraction(-0.02) - Fraction(0.01)) / 3
    error = abs(Fraction(float(reference.history.strain[2, 0])) - exact)
    assert 0 < error <= Fraction(float(reference.strain_bound[2]))


def test_nothing_driven_gives_nothing_with_a_bound_of_zero(resin):
    reference = solve(resin, path_of("simple shear", 350.0, segment("simple shear", 10.0, increments=3)))
    assert np.all(reference.history.stress == 0.0)
    assert np.all(reference.history.bound == 0.0)
    assert reference.relative_bound == 0.0


def test_a_cycle_is_the_same_as_its_segments_written_out(resin):
    mode = "uniaxial stress"
    turn = (
        segment(mode, 300.0, 0.01, T=375.0, increments=5, label="heat"),
        segment(mode, 400.0, 0.0, T=340.0, increments=5, label="cool"),
    )
    cycled = solve(resin, path_of(mode, 340.0, Cycle(repeat=3, segments=turn)))
    written = solve(resin, path_of(mode, 340.0, *turn, *turn, *turn))
    slack = cycled.history.bound + written.history.bound
    assert np.all(np.abs(cycled.history.stress - written.history.stress).max(axis=1) <= slack)
    assert cycled.pieces < written.pieces  # equal turns are cut once
    assert [label for label, ends in zip(cycled.history.segment, cycled.history.ends, strict=True) if ends] == [
        "start", "heat (1)", "cool (1)", "heat (2)", "cool (2)", "heat (3)", "cool (3)",
    ]  # fmt: skip


def test_a_record_of_many_straight_pieces_is_the_same_as_a_segment_a_piece(resin):
    mode = "uniaxial stress"
    durations, T, strain = [10.0, 0.0, 30.0], [350.0, 350.0, 362.0], [0.002, 0.004, -0.001]
    pieces = [segment(mode, d, e, T=t) for d, e, t in zip(durations, strain, T, strict=True)]
    record = Segment(
        label="record",
        durations=durations,
        temperatures=T,
        targets=[piece.targets[0] for piece in pieces],
        stress_controlled=pieces[0].stress_controlled,
        held=pieces[0].held,
        increments=1,
    )
    one, other = solve(resin, path_of(mode, 345.0, record)), solve(resin, path_of(mode, 345.0, *pieces))
    assert np.all(
        np.abs(one.history.stress - other.history.stress).max(axis=1) <= one.history.bound + other.history.bound
    )
    np.testing.assert_array_equal(one.history.time, other.history.time)
    assert one.history.ends.tolist() == [True, False, False, True]


def changed(good: Segment, **fields) -> Segment:
    values = {name: np.array(getattr(good, name)) for name in ("targets", "stress_controlled", "held")}
    for name, (component, value) in fields.items():
        values[name][..., component] = value
    return Segment(label="s", durations=good.durations, temperatures=None, **values)


@pytest.mark.parametrize(
    ("mode", "fields"),
    [
        pytest.param("uniaxial stress", {"targets": (1, 1e5)}, id="a free side under stress"),
        pytest.param("uniaxial strain", {"targets": (1, 1e-3)}, id="a clamped side that moves"),
        pytest.param("uniaxial stress", {"stress_controlled": (2, False)}, id="a side clamped"),
        pytest.param("equibiaxial stress", {"targets": (1, 2e-3)}, id="two unequal strains"),
        pytest.param("equibiaxial stress", {"held": (1, True)}, id="one of two held"),
        pytest.param("hydrostatic", {"stress_controlled": (2, True)}, id="one of three by stress"),
    ],
)
def test_a_path_that_is_not_what_its_mode_says_has_no_guaranteed_bound(resin, mode, fields):
    good = segment(mode, 10.0, 1e-3)
    assert has_closed_response(path_of(mode, 350.0, good))
    path = path_of(mode, 350.0, good, changed(good, **fields))
    assert not has_closed_response(path)
    assert solve(resin, path, accuracy=1e-3).estimated


def test_a_response_beyond_all_numbers_is_refused():
    material = Material(
        shear=PronySeries(equilibrium=0.0, moduli=[1e-3], times=[1e-12]),
        bulk=PronySeries.elastic(1e9),
        shift=WLF(C1=14.2, C2=61.0, T_ref=353.15),
    )
    mode = "simple shear"
    path = path_of(mode, 400.0, segment(mode, 0.0, 1e290, by_stress=True), segment(mode, 1e30, by_stress=True))
    with pytest.raises(ParameterError, match="stay finite"):
        solve(material, path)


def test_the_reference_solution_never_loads_what_it_judges():
    loaded = "import sys, drivers.reference; print(sorted(m for m in sys.modules if m.startswith(('matlib', 'numba'))))"
    out = subprocess.run([sys.executable, "-c", loaded], capture_output=True, text=True, check=True).stdout
    assert "matlib.shift" in out
    for name in ("numba", "matlib.kernels", "matlib.recursion", "matlib.viscoelastic"):
        assert f"'{name}'" not in out
