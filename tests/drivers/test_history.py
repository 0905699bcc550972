"""Histories: components by name, rows at segment ends, the CSV form."""

import csv
import io

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.history import History, csv_text
from matlib.units import STRESS, TEMPERATURE, TIME

# Section 5 of the format: this order, units in brackets.
COLUMNS = [
    *("segment", "time", "temperature", "reduced_time"),
    *("e11", "e22", "e33", "g23", "g13", "g12"),
    *("s11", "s22", "s33", "s23", "s13", "s12"),
]


def history(**changes: object) -> History:
    """Four rows in two segments of one label."""
    rows = np.arange(24.0).reshape(4, 6)
    given_keys: dict[str, object] = {
        "segment": ("start", "pull", "pull", "pull"),
        "time": np.array([0.0, 1.0, 2.0, 60.0]),
        "temperature": np.array([273.15, 300.0, 310.0, 373.15]),
        "reduced_time": np.array([0.0, 0.5, 0.7, 120.0]),
        "strain": rows * 1e-3,
        "stress": rows * 1e6,
        "peak_stress": 23e6,
        "ends": np.array([True, True, False, True]),
    }
    return History(**(given_keys | changes))  # type: ignore[arg-type]


def parsed(text: str) -> list[list[str]]:
    """CSV cells."""
    return list(csv.reader(io.StringIO(text)))


def test_shear_is_engineering_strain_and_tensor_stress():
    h = history(strain=np.eye(6)[[5]], stress=np.eye(6)[[5]])
    np.testing.assert_allclose(h.strain_components[0, 5], np.sqrt(2.0), rtol=1e-15)  # g12 = 2 e12, e12 = 1/sqrt 2
    np.testing.assert_allclose(h.stress_components[0, 5], 1.0 / np.sqrt(2.0), rtol=1e-15)


def test_the_header_names_every_column_in_the_order_of_the_format():
    header = parsed(csv_text(history()))[0]
    assert [cell.partition(" [")[0] for cell in header] == COLUMNS
    units = [cell.partition(" ")[2] for cell in header]
    assert units == ["", "[s]", "[K]", "[s]"] + ["[-]"] * 6 + ["[Pa]"] * 6


def test_units_are_converted_and_named():
    header, *rows = parsed(csv_text(history(), stress=STRESS["MPa"], time=TIME["min"], temperature=TEMPERATURE["degC"]))
    assert header[1:4] == ["time [min]", "temperature [degC]", "reduced_time [min]"]
    assert header[10:] == [f"{name} [MPa]" for name in COLUMNS[10:]]
    assert [float(cell) for cell in rows[3][1:4]] == [1.0, 100.0, 2.0]
    assert float(rows[3][10]) == 18.0


def test_a_bound_is_the_last_column_where_there_is_one():
    header, *rows = parsed(csv_text(history(bound=np.array([0.0, 1e3, 2e3, 3e3])), stress=STRESS["kPa"]))
    assert header[-1] == "bound [kPa]"
    assert [float(row[-1]) for row in rows] == [0.0, 1.0, 2.0, 3.0]
    assert len(header) == len(COLUMNS) + 1


def test_a_clock_that_is_not_known_leaves_its_column_empty():
    rows = parsed(csv_text(history(reduced_time=None)))
    assert rows[0][3] == "reduced_time [s]"
    assert [row[3] for row in rows[1:]] == [""] * 4


def test_a_label_with_comma_quote_and_newline_reads_back():
    label = 'pull, "hard"\nand fast'
    rows = parsed(csv_text(history(segment=("start", label, label, label))))
    assert rows[1][0] == "start"
    assert rows[2][0] == label


@given(values=st.lists(st.floats(-1e300, 1e300), min_size=6, max_size=6))
def test_every_number_reads_back_to_the_same_double(values):
    h = history(strain=np.zeros((4, 6)), stress=np.tile(values, (4, 1)), time=np.array([0.0, 1e-9, 1.0 / 3.0, 1e9]))
    rows = parsed(csv_text(h))[1:]
    np.testing.assert_array_equal([float(cell) for cell in rows[0][10:]], h.stress_components[0])
    np.testing.assert_array_equal([float(row[1]) for row in rows], h.time)


def test_rows_at_segment_ends_are_told_apart_even_where_labels_are_equal():
    ends = history().at_segment_ends()
    assert ends.segment == ("start", "pull", "pull")
    assert ends.time.tolist() == [0.0, 1.0, 60.0]
    assert ends.stress[:, 0].tolist() == [0.0, 6e6, 18e6]
    assert ends.reduced_time is not None
    assert ends.reduced_time.tolist() == [0.0, 0.5, 120.0]
    assert len(ends) == 3


def test_rows_at_segment_ends_go_by_labels_where_nothing_else_is_known():
    ends = history(segment=("start", "a", "b", "b"), ends=None, bound=np.arange(4.0)).at_segment_ends()
    assert ends.time.tolist() == [0.0, 1.0, 60.0]
    assert ends.bound is not None
    assert ends.bound.tolist() == [0.0, 1.0, 3.0]


def test_the_length_of_a_history_is_its_rows():
    assert len(history()) == 4
    with pytest.raises(AttributeError):
        history().peak_stress = 0.0
