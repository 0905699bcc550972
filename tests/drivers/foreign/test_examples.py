import shutil
import tomllib

import numpy as np
import pytest

from drivers.battery import Window, battery
from drivers.demo.constants import example_constants, example_memory
from drivers.difference import largest_difference
from drivers.foreign.foreign import ForeignRoutine
from drivers.path import MODES, Path, Segment
from drivers.path_file import read_path
from drivers.point import drive
from matlib.card import read_card
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.routine import Increment
from matlib.shift import VFT, NoShift, find_shift_rule
from matlib.tensors import mandel_from_strain, mandel_from_stress
from matlib.viscoelastic import LinearViscoelastic

# Another order of the same operations: a rounding of 1e-16 an increment, over 2000 of them, and 1e-13 in 1/a_T where ln a_T is 60.
AGREEMENT = 1e-12

LANGUAGES = ["c", "f90", "python"]


@pytest.fixture(params=LANGUAGES)
def example(request, examples):
    if request.param == "f90" and not shutil.which("gfortran"):
        pytest.skip("no gfortran on this machine to build the example with")
    with ForeignRoutine(examples / f"{request.param}.routine.toml") as routine:
        yield routine


@pytest.fixture
def own(examples):
    material = read_card(examples / "laboratory.card.toml").material()
    return LinearViscoelastic(material=material, shift_rule=find_shift_rule("mean-log"))


def pull(mode, *, strain=None, stress=None):
    driven, free = list(MODES[mode].driven), list(MODES[mode].free)
    row, controlled = np.zeros(6), np.zeros(6, dtype=bool)
    controlled[free] = True
    row[driven] = strain if stress is None else stress
    controlled[driven] = stress is not None
    target = mandel_from_strain(row) if stress is None else mandel_from_stress(row)
    segments = [
        Segment(label=label, durations=[duration], temperatures=[T], targets=[target * share], held=[False] * 6,
                stress_controlled=controlled, increments=20, spacing=spacing)
        for label, duration, T, share, spacing in (
            ("jump", 0.0, 330.0, 0.3, "even"), ("pull", 40.0, 350.0, 1.0, "even"), ("dwell", 1e5, 300.0, 1.0, "log"),
        )
    ]  # fmt: skip
    return Path(name=mode, mode=MODES[mode], start_temperature=330.0, parts=tuple(segments))


def mixed():
    controlled = np.array([False, True, False, True, False, True])
    target = mandel_from_strain(np.array([0.01, 0, -0.004, 0, 0.006, 0])) + mandel_from_stress(
        np.array([0, 2e6, 0, 1e6, 0, -3e6])
    )
    segment = Segment(label="pull", durations=[60.0], temperatures=[320.0], targets=[target], held=[False] * 6,
                      stress_controlled=controlled, increments=20)  # fmt: skip
    return Path(name="components", mode=MODES["components"], start_temperature=345.0, parts=(segment,))


@pytest.mark.parametrize("mode", [mode for mode in MODES if mode != "components"])
def test_an_example_answers_every_mode_as_the_built_in_material(example, own, mode):
    for path in (pull(mode, strain=0.01), pull(mode, stress=4e6)):
        assert largest_difference(drive(own, path), drive(example, path)).relative < AGREEMENT


def test_an_example_answers_mixed_components_as_the_built_in_material(example, own):
    assert largest_difference(drive(own, mixed()), drive(example, mixed())).relative < AGREEMENT


def test_an_example_answers_the_thermal_cycles_as_the_built_in_material(example, own, examples):
    path = read_path(examples / "thermal-cycles.path.toml").with_increments(15)
    assert largest_difference(drive(own, path), drive(example, path)).relative < AGREEMENT


def test_the_battery_in_c_agrees_with_the_built_in_material(examples, own):
    window = Window(temperature=(260.0, 380.0), time=(1e-1, 1e7), source="test")
    with ForeignRoutine(examples / "c.routine.toml") as routine:
        for path in battery(own.material, window):
            assert largest_difference(drive(own, path), drive(routine, path)).relative < AGREEMENT


def test_an_example_has_the_tangent_of_the_built_in_material(example, own):
    rng = np.random.default_rng(7)
    for duration in (0.0, 1e-3, 10.0, 1e8):
        strain = (rng.normal(size=6) * 0.01, rng.normal(size=6) * 0.01)
        increment = Increment(time=5.0, duration=duration, temperature=(320.0, 340.0), strain=strain)
        ours = own.update(increment, np.zeros(own.memory_size))
        theirs = example.update(increment, np.zeros(example.memory_size))
        scale = np.abs(ours.tangent).max()
        np.testing.assert_allclose(theirs.tangent, ours.tangent, rtol=0.0, atol=AGREEMENT * scale)
        np.testing.assert_allclose(theirs.stress, ours.stress, rtol=0.0, atol=AGREEMENT * np.abs(ours.stress).max())


def test_shipped_constants_are_those_of_the_laboratory_card(examples):
    material = read_card(examples / "laboratory.card.toml").material()
    for language in LANGUAGES:
        table = tomllib.loads((examples / f"{language}.routine.toml").read_text())
        assert table["constants"] == example_constants(material)  # shortest text that reads back to the same double
        assert table.get("n_memory", example_memory(material)) == example_memory(material)


def test_constants_of_an_equivalent_law_say_the_same():
    elastic = PronySeries.elastic(1e9)
    law = VFT(B=2000.0, T_inf=200.0, T_ref=330.0)
    C1, C2, T_ref, alpha = example_constants(Material(shear=elastic, bulk=elastic, shift=law, expansion=1e-5))[-4:]
    T = 350.0
    # design: T_inf = T_ref - C2, B = ln(10) C1 C2
    assert -np.log(10.0) * C1 * (T - T_ref) / (C2 + T - T_ref) == pytest.approx(float(law.ln_shift(T)), rel=1e-13)
    assert alpha == 1e-5


def test_a_law_that_the_examples_do_not_know_is_refused():
    elastic = PronySeries.elastic(1e9)
    with pytest.raises(ParameterError, match="WLF, VFT or Arrhenius"):
        example_constants(Material(shear=elastic, bulk=elastic, shift=NoShift()))


def test_an_example_refuses_a_temperature_below_the_pole(example):
    increment = Increment(time=0.0, duration=1.0, temperature=(330.0, 200.0), strain=(np.zeros(6), np.zeros(6)))
    with pytest.raises(Exception, match=r"it returned 1|pole is at 202") as info:
        example.update(increment, np.zeros(example.memory_size))
    assert info.value.kind == ("exception" if "Python" in example.name else "code")
