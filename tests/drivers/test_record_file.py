"""Measured records: columns by name, units in brackets, faults by row."""

import numpy as np
import pytest

from drivers.record_file import FAULTS_SHOWN, read_record
from matlib.errors import FileError
from matlib.units import STRESS, TEMPERATURE, TIME


@pytest.fixture
def record(tmp_path):
    def put(text: str, stress: str | None = None):
        file = tmp_path / "oven.csv"
        file.write_bytes(text.encode() if isinstance(text, str) else text)
        unit = None if stress is None else STRESS[stress]
        return read_record(file, time=TIME["s"], temperature=TEMPERATURE["degC"], stress=unit)

    return put


def faults_of(record, *given) -> list[str]:
    """The faults of a record, each without its file."""
    with pytest.raises(FileError) as caught:
        record(*given)
    assert caught.value.file.endswith("oven.csv")
    return [str(fault) for fault in caught.value.faults]


def test_columns_come_in_any_order_and_others_are_passed_over(record):
    got = record("operator,strain,temperature,time\nx,0.001,20,1\ny,0.002,30,3\n")
    assert got.time.tolist() == [1.0, 3.0]
    np.testing.assert_allclose(got.temperature, [293.15, 303.15], rtol=1e-15)
    assert got.value.tolist() == [0.001, 0.002]
    assert not got.is_stress


def test_a_unit_in_brackets_counts_before_the_one_of_the_path(record):
    got = record("time [min],temperature [K],stress [kPa]\n1,300,5\n2,310,6\n", "MPa")
    assert got.time.tolist() == [60.0, 120.0]
    assert got.temperature.tolist() == [300.0, 310.0]
    assert got.value.tolist() == [5e3, 6e3]
    assert got.is_stress


def test_columns_without_a_unit_take_the_one_of_the_path(record):
    assert record("time,temperature,stress\n1,30,5\n2,31,6\n", "MPa").value.tolist() == [5e6, 6e6]


def test_a_number_too_small_to_reckon_with_is_a_zero(record):
    assert record("time,temperature,strain\n0,20,1e-300\n1,20,-1e-59\n").value.tolist() == [0.0, -1e-59]


def test_blank_lines_spaces_and_a_byte_order_mark_are_no_fault(record):
    got = record("\ufefftime , temperature [degC] , strain [-]\n\n 0 , 20 , 0 \n 1 , 21 , 1e-3 \n\n")
    assert got.value.tolist() == [0.0, 1e-3]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "header: found nothing, expected a column 'time'"),
        ("time,strain\n0,0\n1,0\n", "header: found time, strain, expected a column 'temperature'"),
        (
            "time,temperature\n0,0\n1,0\n",
            "header: found neither, expected one of the columns 'strain' and 'stress'",
        ),
        (
            "time,temperature,strain,stress\n0,0,0,0\n1,0,0,0\n",
            "header: found strain and stress, expected one of the columns 'strain' and 'stress'",
        ),
        ("time,temperature,strain\n0,20,0\n", "rows: found 1, expected at least 2 rows under the header"),
        ("time,temperature,strain [%]\n0,20,0\n1,20,0\n", "header: found strain [%], expected strain without a unit"),
        (
            "time [hours],temperature,strain\n0,20,0\n1,20,0\n",
            "header: found time [hours], expected one of s, ms, us, min, h, d",
        ),
        ("time,temperature,strain\n0,20,0\n1,20,x\n", "line 3, strain: found 'x', expected a finite number"),
        ("time,temperature,strain\n0,20,0\n1,nan,0\n", "line 3, temperature: found 'nan', expected a finite number"),
        ("time,temperature,strain\n0,20,0\n1,20\n", "line 3, strain: found '', expected a finite number"),
        ("time,temperature,strain\n5,20,0\n1,20,0\n", "line 3, time: found 1 s, expected >= 5 s, the row before"),
        (
            "time,temperature,strain\n0,20,0\n1,-300,0\n",
            "line 3, temperature: found -26.85 K, expected above absolute zero",
        ),
        ("time,temperature,strain\n0,20,0\n1,20,1_000\n", "line 3, strain: found '1_000', expected a finite number"),
        (
            "time,temperature,strain\n0,20,0\n1,20,1e5\n",
            "line 3, strain: found '1e5', expected a number from -1000 to 1000",
        ),
    ],
)
def test_each_fault_is_named_by_its_row_and_column(record, text, expected):
    assert expected in faults_of(record, text)


def test_a_fault_counts_the_lines_of_the_file_blank_ones_and_line_breaks_in_quotes_too(record):
    text = 'time,temperature,strain,who\n\n0,20,0,"a\nb"\n1,20,x,c\n'
    assert faults_of(record, text) == ["line 5, strain: found 'x', expected a finite number"]


def test_a_stress_without_any_unit_asks_for_one(record):
    (fault,) = faults_of(record, "time,temperature,stress\n0,20,0\n1,20,0\n")
    assert fault.startswith("header: found stress, expected a unit in brackets (Pa, kPa, MPa, GPa, psi, ksi)")


def test_many_faults_are_counted_and_not_all_shown(record):
    found = faults_of(record, "time,temperature,strain\n" + "0,20,x\n" * 100)
    assert len(found) == FAULTS_SHOWN + 1
    assert found[-1] == f"rows: found {100 - FAULTS_SHOWN} more faults, expected none"


def test_a_quotation_that_never_ends_is_a_fault_and_no_crash(record):
    assert faults_of(record, 'time,temperature,strain\n0,20,"0\n' + "1,20,0\n" * 20000)


def test_bytes_that_are_no_text_are_a_fault(tmp_path):
    file = tmp_path / "oven.csv"
    file.write_bytes(b"time,temperature,strain\n\xff\xfe\n")
    with pytest.raises(FileError, match="expected UTF-8 text"):
        read_record(file, time=TIME["s"], temperature=TEMPERATURE["K"], stress=None)
