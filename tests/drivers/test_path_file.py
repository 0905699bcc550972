"""Path files: every mode, every key, every fault at once."""

from pathlib import Path as FilePath

import numpy as np
import pytest

from drivers.path import MODES, Cycle
from drivers.path_file import LARGEST_RUN, read_path
from matlib.errors import FileError
from matlib.tensors import strain_from_mandel, stress_from_mandel

HEAD = """name = "p"
mode = "uniaxial stress"
[units]
time = "min"
temperature = "degC"
stress = "MPa"
[start]
temperature = 23.0
"""
PULL = """[[segment]]
label = "pull"
duration = 2.0
strain = 0.01
temperature = 40.0
increments = 7
spacing = "log"
"""


@pytest.fixture
def write(tmp_path):
    def put(text: str, name: str = "a.path.toml") -> FilePath:
        file = tmp_path / name
        file.write_text(text, encoding="utf-8")
        return file

    return put


def faults_of(file: FilePath) -> dict[str, str]:
    """What is wrong with a file: the rest of each line by its key."""
    with pytest.raises(FileError) as caught:
        read_path(file)
    assert caught.value.file == str(file)
    assert all(line.startswith(f"{file}: ") for line in caught.value.lines())
    return {fault.key: str(fault).partition(": ")[2] for fault in caught.value.faults}


def test_a_segment_arrives_in_si_units_with_everything_it_says(write):
    path = read_path(write(HEAD + PULL))
    (segment,) = path.segments
    assert (path.name, path.mode.name, path.start_temperature) == ("p", "uniaxial stress", 296.15)
    assert (segment.label, segment.increments, segment.spacing) == ("pull", 7, "log")
    assert segment.durations.tolist() == [120.0]
    assert segment.temperatures is not None
    assert segment.temperatures.tolist() == [313.15]
    assert segment.targets.tolist() == [[0.01, 0, 0, 0, 0, 0]]
    assert segment.stress_controlled.tolist() == [False, True, True, False, False, False]
    assert not segment.held.any()


def test_what_a_segment_leaves_out_has_a_default_or_is_held(write):
    (segment,) = read_path(write(HEAD + "[[segment]]\nduration = 1.0\n")).segments
    assert (segment.label, segment.increments, segment.spacing) == ("segment 1", 100, "even")
    assert segment.temperatures is None
    assert segment.held.tolist() == [True, False, False, False, False, False]


@pytest.mark.parametrize("mode", [mode for mode in MODES.values() if mode.driven])
@pytest.mark.parametrize("key", ["strain", "stress"])
def test_each_named_mode_drives_its_components_by_strain_or_by_stress(write, mode, key):
    text = HEAD.replace("uniaxial stress", mode.name) + f"[[segment]]\nduration = 1.0\n{key} = 0.5\n"
    (segment,) = read_path(write(text)).segments
    expected = np.zeros(6)
    expected[list(mode.driven)] = 0.5 if key == "strain" else 0.5e6
    convert = strain_from_mandel if key == "strain" else stress_from_mandel
    np.testing.assert_allclose(convert(segment.targets[0]), expected, rtol=1e-15)  # one factor of sqrt 2
    controlled = set(mode.free) | (set(mode.driven) if key == "stress" else set())
    assert set(np.flatnonzero(segment.stress_controlled)) == controlled
    assert not segment.held.any()


def test_a_stress_that_is_left_out_is_held_as_a_stress(write):
    text = HEAD + "[[segment]]\nduration = 1.0\nstress = 5.0\n[[segment]]\nduration = 9.0\n"
    load, creep = read_path(write(text)).segments
    assert (
        load.stress_controlled.tolist() == creep.stress_controlled.tolist() == [True, True, True, False, False, False]
    )
    assert creep.held.tolist() == [True, False, False, False, False, False]


def test_control_changes_from_segment_to_segment(write):
    text = HEAD + "".join(f"[[segment]]\nduration = 1.0\n{key} = 0.001\n" for key in ("strain", "stress", "strain"))
    controlled = [bool(segment.stress_controlled[0]) for segment in read_path(write(text)).segments]
    assert controlled == [False, True, False]


COMPONENTS = """[[segment]]
duration = 1.0
strain = { e11 = 0.01, g12 = 0.002, g13 = 0.0, g23 = 0.0 }
stress = { s22 = 0.0, s33 = -3.0 }
"""


def test_components_are_named_one_by_one_with_engineering_shear(write):
    (segment,) = read_path(write(HEAD.replace("uniaxial stress", "components") + COMPONENTS)).segments
    assert segment.stress_controlled.tolist() == [False, True, True, False, False, False]
    assert strain_from_mandel(segment.targets[0])[[0, 5]].tolist() == pytest.approx([0.01, 0.002], rel=1e-15)
    assert segment.targets[0, 2] == -3e6


def test_components_that_a_later_segment_leaves_out_are_held_under_their_control(write):
    text = HEAD.replace("uniaxial stress", "components") + COMPONENTS
    text += "[[segment]]\nduration = 1.0\nstress = { s11 = 1.0 }\n"
    later = read_path(write(text)).segments[1]
    assert later.stress_controlled.tolist() == [True, True, True, False, False, False]
    assert later.held.tolist() == [False, True, True, True, True, True]


def test_components_named_twice_or_not_at_all_are_refused(write):
    text = HEAD.replace("uniaxial stress", "components") + COMPONENTS.replace("e11", "e22")
    found = faults_of(write(text))["segment[1]"]
    assert found in (
        "found strain and stress for 22, expected one of them",
        "found nothing for 11, expected each of the six components in exactly one of strain and stress",
    )
    with pytest.raises(FileError) as caught:
        read_path(write(text))
    assert len(caught.value.faults) == 2


def test_a_wrong_component_is_named_with_the_right_ones(write):
    text = HEAD.replace("uniaxial stress", "components") + COMPONENTS.replace("g12", "e12")
    found = faults_of(write(text))
    names = "'e11', 'e22', 'e33', 'g23', 'g13' or 'g12'"
    assert found["segment[1].strain.e12"] == f"found 'e12', expected one of {names}; write 'g12'"


def test_a_cycle_repeats_its_segments(write):
    text = HEAD + PULL
    text += '[[segment]]\nrepeat = 3\nsegments = [{ label = "heat", duration = 1.0 }, { duration = 2.0 }]\n'
    path = read_path(write(text))
    cycle = path.parts[1]
    assert isinstance(cycle, Cycle)
    assert cycle.repeat == 3
    assert [label for _, label, _ in path.unrolled()][:4] == ["pull", "heat (1)", "segment 3 (1)", "heat (2)"]


def test_all_faults_of_a_file_are_told_at_once_and_by_their_keys(write):
    text = HEAD + PULL.replace("2.0", "-2.0").replace("7", "0").replace("strain = 0.01", "strian = 0.01")
    text += "[[segment]]\nrepeat = 0\nsegments = [{ duration = 1.0 }]\n"
    text += '[[segment]]\nrepeat = 2\nsegments = [{ duration = "1 h" }]\n'
    found = faults_of(write(text))
    assert found == {
        "segment[1].duration": "found -2.0, expected a number >= 0",
        "segment[1].increments": "found 0, expected a number >= 1",
        "segment[1].strian": "found 0.01, expected one of the keys "
        "duration, increments, label, spacing, strain, stress, temperature; write 'strain'",
        "segment[2].repeat": "found 0, expected a number >= 1",
        "segment[3].segments[1].duration": "found '1 h', expected a number",
    }


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ('mode = "uniaxial stress"', 'mode = "biaxial"', "mode"),
        ('time = "min"', 'time = "minutes"', "units.time"),
        ('temperature = "degC"', 'temperature = "C"', "units.temperature"),
        ("[start]\ntemperature = 23.0\n", "", "start"),
        ("temperature = 23.0", "temperature = -273.15", "start.temperature"),
        ("temperature = 40.0", "temperature = -300.0", "segment[1].temperature"),
        ("duration = 2.0", "duration = nan", "segment[1].duration"),
        ("duration = 2.0", "duration = 1e31", "segment[1].duration"),
        ("duration = 2.0", "duration = 1e-61", "segment[1].duration"),
        ("strain = 0.01", "strain = -1e-300", "segment[1].strain"),
        ("strain = 0.01", "strain = 1e4", "segment[1].strain"),
        ("strain = 0.01", "strain = true", "segment[1].strain"),
        ("increments = 7", "increments = 7.5", "segment[1].increments"),
        ('spacing = "log"', 'spacing = "fine"', "segment[1].spacing"),
        ('label = "pull"', 'label = ""', "segment[1].label"),
        (PULL, "", "segment"),
        (PULL, "[[segment]]\nrepeat = 2\nsegments = []\n", "segment[1].segments"),
        (PULL, "[[segment]]\nrepeat = 2\n", "segment[1].segments"),
        (PULL, "segment = 3\n", "start.segment"),
        ('name = "p"\n', "", "name"),
    ],
)
def test_a_fault_is_named_by_its_key(write, old, new, key):
    assert old in HEAD + PULL
    assert key in faults_of(write((HEAD + PULL).replace(old, new)))


def test_strain_and_stress_in_one_segment_are_a_contradiction(write):
    found = faults_of(write(HEAD + PULL + "stress = 1.0\n"))
    assert found == {"segment[1]": "found strain and stress for 11, expected one of them"}


def test_a_stress_needs_a_unit(write):
    text = HEAD.replace('stress = "MPa"\n', "") + "[[segment]]\nduration = 1.0\nstress = 5.0\n"
    assert faults_of(write(text)) == {
        "units.stress": "found nothing, expected units.stress, since a stress is given; add the key"
    }


def test_a_path_without_any_stress_needs_no_stress_unit(write):
    assert read_path(write(HEAD.replace('stress = "MPa"\n', "") + PULL)).increment_count == 7


def test_a_run_that_would_never_end_is_refused_at_once(write):
    text = HEAD + "[[segment]]\nrepeat = 10000000\nsegments = [{ duration = 1.0, increments = 10000000 }]\n"
    found = faults_of(write(text))["segment"]
    assert found == f"found 100000000000000 increments, repeats counted, expected at most {LARGEST_RUN}"


def test_an_integer_of_thousands_of_digits_is_a_fault_like_any_other(write):
    text = HEAD + PULL.replace("increments = 7", "increments = 0x" + "f" * 5000)
    assert faults_of(write(text)) == {
        "segment[1].increments": "found a number of thousands of digits, expected a number <= 1e+07"
    }


RECORD = """name = "oven"
mode = "uniaxial stress"
record = "oven.csv"
[units]
time = "min"
temperature = "degC"
"""


def test_a_record_becomes_one_segment_that_starts_with_a_jump_to_its_first_row(write):
    write("time,temperature,strain\n1,20,0.001\n2,40,0.002\n2,40,0.004\n5,30,0.003\n", "oven.csv")
    path = read_path(write(RECORD))
    (segment,) = path.segments
    assert path.start_temperature == 293.15
    assert segment.label == "record"
    assert segment.durations.tolist() == [0.0, 60.0, 0.0, 180.0]
    assert segment.temperatures is not None
    assert segment.temperatures.tolist() == pytest.approx([293.15, 313.15, 313.15, 303.15], rel=1e-15)
    assert segment.targets[:, 0].tolist() == [0.001, 0.002, 0.004, 0.003]
    assert segment.stress_controlled.tolist() == [False, True, True, False, False, False]


def test_a_record_of_stress_controls_the_stress(write):
    write("time,temperature,stress [kPa]\n0,20,1\n2,40,2\n", "oven.csv")
    (segment,) = read_path(write(RECORD)).segments
    assert segment.targets[:, 0].tolist() == [1e3, 2e3]
    assert segment.stress_controlled.tolist() == [True, True, True, False, False, False]


@pytest.mark.parametrize(
    ("text", "key"),
    [
        (RECORD + PULL, "record"),
        (RECORD + "[start]\ntemperature = 20.0\n", "start"),
        (RECORD.replace("uniaxial stress", "components"), "mode"),
    ],
)
def test_a_record_stands_alone(write, text, key):
    write("time,temperature,strain\n0,20,0\n2,40,0.002\n", "oven.csv")
    assert key in faults_of(write(text))


def test_a_missing_record_is_named_itself(write):
    with pytest.raises(FileError) as caught:
        read_path(write(RECORD))
    assert caught.value.file.endswith("oven.csv")
    assert [fault.found for fault in caught.value.faults] == ["nothing"]
