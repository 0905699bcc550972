import pickle

import pytest

from matlib.errors import (
    CardproofError,
    ConversionError,
    Fault,
    FaultyInputError,
    FileError,
    FilesError,
    ParameterError,
    PoleError,
    ShiftRangeError,
    UnknownNameError,
    both_scales,
)

FAULT = Fault(key="shift.C2", found="-51.6", expected="a number > 0")
HINTED = Fault(key="shift.c1", found="14.2", expected="one of the keys C1, C2", hint="write 'C1'")
FILE = FileError("a.card.toml", [FAULT, HINTED])

CASES = [
    pytest.param(
        ParameterError("tau", "> 0 s", -3.0),
        ValueError,
        "`tau` must be > 0 s (got -3.0)",
        {"name": "tau", "expected": "> 0 s", "found": -3.0, "hint": ""},
        id="parameter",
    ),
    pytest.param(
        ParameterError("nu", "below 0.5", 0.7, "look at K"),
        ValueError,
        "`nu` must be below 0.5 (got 0.7); look at K",
        {"hint": "look at K"},
        id="parameter with a hint",
    ),
    pytest.param(
        ShiftRangeError("table", 500.0, 450.0, "outside the measured range, which ends at"),
        ValueError,
        "shift law table: no shift factor at 500 K (226.85 degC): outside the measured range, which ends at "
        "450 K (176.85 degC)",
        {"law": "table", "temperature": 500.0, "limit": 450.0},
        id="shift range",
    ),
    pytest.param(
        PoleError("wlf", 300.0, 321.55),
        ShiftRangeError,
        "shift law wlf: no shift factor at 300 K (26.85 degC): it is at or below the pole T_inf = 321.55 K (48.4 degC)",
        {"law": "wlf", "temperature": 300.0, "limit": 321.55},
        id="pole",
    ),
    pytest.param(
        UnknownNameError("shift rule", "mid", iter(["start", "end"])),
        LookupError,
        "unknown shift rule 'mid': use one of start, end",
        {"kind": "shift rule", "name": "mid", "known": ("start", "end")},
        id="unknown name",
    ),
    pytest.param(ConversionError("no such conversion"), ValueError, "no such conversion", {}, id="conversion"),
    pytest.param(
        FILE,
        ValueError,
        "a.card.toml: shift.C2: found -51.6, expected a number > 0\n"
        "a.card.toml: shift.c1: found 14.2, expected one of the keys C1, C2; write 'C1'",
        {"file": "a.card.toml", "faults": (FAULT, HINTED)},
        id="file",
    ),
    pytest.param(
        FilesError([FILE, FileError("b.card.toml", [FAULT])]),
        ValueError,
        f"{FILE}\nb.card.toml: shift.C2: found -51.6, expected a number > 0",
        {},
        id="files",
    ),
    pytest.param(
        FaultyInputError([FAULT, HINTED]),
        ValueError,
        "shift.C2: found -51.6, expected a number > 0\n"
        "shift.c1: found 14.2, expected one of the keys C1, C2; write 'C1'",
        {"faults": (FAULT, HINTED)},
        id="faulty input",
    ),
]


@pytest.mark.parametrize(("error", "builtin", "text", "fields"), CASES)
def test_an_error_has_fields_and_text_and_is_a_builtin_too(error, builtin, text, fields):
    assert isinstance(error, CardproofError)
    assert isinstance(error, builtin)
    assert str(error) == text
    assert {name: getattr(error, name) for name in fields} == fields


@pytest.mark.parametrize(("error", "builtin", "text", "fields"), CASES)
def test_an_error_survives_the_way_to_another_process(error, builtin, text, fields):
    copied = pickle.loads(pickle.dumps(error))
    assert type(copied) is type(error)
    assert str(copied) == text
    assert {name: getattr(copied, name) for name in fields} == fields


def test_a_terminal_gets_one_line_a_fault_with_the_file_in_each():
    assert FILE.lines() == str(FILE).split("\n")
    assert FilesError([FILE, FILE]).lines() == FILE.lines() * 2
    assert ParameterError("tau", "> 0 s", -3.0).lines() == ["cardproof: `tau` must be > 0 s (got -3.0)"]


def test_faults_without_a_file_take_its_name_later():
    named = FaultyInputError([FAULT]).in_file("a.card.toml")
    assert (named.file, named.faults) == ("a.card.toml", (FAULT,))


@pytest.mark.parametrize(
    ("T", "text"),
    [(353.15, "353.15 K (80 degC)"), (0.0, "0 K (-273.15 degC)"), (273.15, "273.15 K (0 degC)")],
)
def test_temperatures_are_written_in_both_scales(T, text):
    assert both_scales(T) == text
