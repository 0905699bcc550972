from __future__ import annotations

import json
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings

from drivers.baseline_file import baseline_text, canonical, digest, read_baseline, write_baseline
from drivers.baseline_paths import RecordedPath, recorded_path, recorded_table
from drivers.baseline_schema import RecordedTable
from drivers.history import History
from drivers.path import Cycle, Segment
from drivers.path import Path as LoadPath
from matlib.arrays import frozen
from matlib.documents import validated
from matlib.errors import FileError
from tests.baselines import PATH_FILE, recorded
from tests.cards import SOUND, changed, toml
from tests.strategies import paths

BYTES = 60
"""Bytes that are changed one at a time; 200 when this was first shown."""

RECORD_KILLS = 3
WRITER_KILLS = 6
"""Runs that are killed at a random moment; 50 of each when this was first shown."""


@pytest.fixture(scope="module")
def text() -> str:
    return baseline_text(recorded(names=("relaxation, 60 degC", "clamped cooling")))


def resealed(content: dict[str, Any]) -> str:
    """What a forger would write: the content with the digest that belongs to it."""
    return canonical(content | {"digest": digest(content)}) + "\n"


def refused(file: Path, data: bytes) -> str:
    file.write_bytes(data)
    with pytest.raises(FileError) as error:
        read_baseline(file)
    return str(error.value)


def assert_same_segment(a: Segment, b: Segment) -> None:
    assert (a.label, a.increments, a.spacing) == (b.label, b.increments, b.spacing)
    for name in ("durations", "temperatures", "targets", "stress_controlled", "held"):
        one, other = getattr(a, name), getattr(b, name)
        assert (one is None) == (other is None)
        assert one is None or one.tobytes() == other.tobytes()


def assert_same_path(a: LoadPath, b: LoadPath) -> None:
    """Equal to the last bit."""
    assert (a.name, a.mode, a.start_temperature) == (b.name, b.mode, b.start_temperature)
    assert len(a.parts) == len(b.parts)
    for one, other in zip(a.parts, b.parts, strict=True):
        assert type(one) is type(other)
        if isinstance(one, Cycle) and isinstance(other, Cycle):
            assert one.repeat == other.repeat
    for one, other in zip(a.segments, b.segments, strict=True):
        assert_same_segment(one, other)


@given(path=paths())
@settings(max_examples=60)
def test_any_path_is_stored_whole_and_rebuilt_to_the_last_bit(path: LoadPath) -> None:
    rng = np.random.default_rng(0)
    history = History(
        segment=("start", "x"),
        time=frozen([0.0, 1.0 / 3.0]),
        temperature=frozen([300.0, 301.1]),
        reduced_time=None,
        strain=frozen(rng.normal(size=(2, 6))),
        stress=frozen(rng.normal(size=(2, 6))),
        peak_stress=1.0,
        bound=frozen([0.0, 1e-9]),
    )
    one = RecordedPath(
        path=path,
        tolerance=0.1,
        increments=(3,) * len(path.segments),
        rows=(0, 7),
        response=history,
        strain_bound=frozen([0.0, 1e-12]),
        estimated=True,
    )
    table = validated(RecordedTable, json.loads(canonical(recorded_table(one))))
    again = recorded_path(table.path, table.tolerance, table.response)
    assert_same_path(again.path, path)
    assert (again.increments, again.rows, again.estimated, again.tolerance) == (one.increments, one.rows, True, 0.1)
    assert again.response.time.tobytes() == history.time.tobytes()
    # Six-vectors pass through named components, a factor sqrt 2 there and back: one rounding each way.
    np.testing.assert_allclose(again.response.stress, history.stress, rtol=4e-16)
    np.testing.assert_allclose(again.response.strain, history.strain, rtol=4e-16)


def test_a_baseline_that_was_read_is_written_again_byte_for_byte(tmp_path: Path, text: str) -> None:
    file = tmp_path / "a.baseline.json"
    file.write_bytes(text.encode())
    write_baseline(tmp_path / "b.baseline.json", read_baseline(file))
    assert (tmp_path / "b.baseline.json").read_bytes() == file.read_bytes()


def test_a_baseline_holds_the_whole_card_with_its_units(tmp_path: Path, text: str) -> None:
    file = tmp_path / "a.baseline.json"
    file.write_bytes(text.encode())
    baseline = read_baseline(file)
    assert baseline.tables == SOUND
    assert baseline.card().material().shear.instantaneous == pytest.approx(3e9 / 2.7, rel=1e-14)  # G = E/(2 (1 + nu))


def test_any_single_byte_changed_is_refused(tmp_path: Path, text: str) -> None:
    data, rng = text.encode(), np.random.default_rng(20240501)
    file = tmp_path / "a.baseline.json"
    for place in rng.integers(0, len(data), BYTES):
        other = (data[place] + rng.integers(1, 256)) % 256
        refused(file, data[:place] + bytes([other]) + data[place + 1 :])


def test_a_changed_byte_of_white_space_is_refused(tmp_path: Path, text: str) -> None:
    data, rng = text.encode(), np.random.default_rng(7)
    blanks = [k for k, byte in enumerate(data) if byte in b" \n"]
    for place in rng.choice(blanks, 20):
        message = refused(tmp_path / "a.baseline.json", data[:place] + b"\t" + data[place + 1 :])
        assert "other white space, digits or order than were recorded" in message


@pytest.mark.parametrize(
    "spoil",
    [
        pytest.param(lambda data: b"\xef\xbb\xbf" + data, id="byte order mark"),
        pytest.param(lambda data: data.replace(b"\n", b"\r\n"), id="other line ends"),
        pytest.param(lambda data: data + b"\n", id="a line more"),
        pytest.param(lambda data: data[:-1], id="the last line end gone"),
        pytest.param(lambda data: data[: len(data) // 2], id="half of it"),
        pytest.param(lambda data: b"", id="empty"),
        pytest.param(lambda data: b"{}", id="foreign"),
        pytest.param(lambda data: b"[1, 2]", id="a list"),
        pytest.param(lambda data: b"\xff\xfe\x00", id="binary"),
        pytest.param(lambda data: b"[" * 100_000, id="nesting without end"),
        pytest.param(lambda data: data.replace(b'"tolerance": 0.01', b'"tolerance": NaN', 1), id="not a number"),
        pytest.param(lambda data: data.replace(b'"tolerance": 0.01', b'"tolerance": 1e999', 1), id="infinite"),
        pytest.param(lambda data: data.replace(b'"tolerance": 0.01', b'"tolerance": 0.010', 1), id="other digits"),
        pytest.param(lambda data: data.replace(b'"tolerance": 0.01', b'"tolerance": 0.5', 1), id="edited"),
        pytest.param(lambda data: data.replace(b"{", b'{"schema": 1, ', 1), id="a key twice"),
    ],
)
def test_a_damaged_edited_or_foreign_file_is_refused(tmp_path: Path, text: str, spoil: Any) -> None:
    data = text.encode()
    assert spoil(data) != data
    assert "a.baseline.json" in refused(tmp_path / "a.baseline.json", spoil(data))


def test_an_edited_file_is_told_to_be_restored_or_recorded_again(tmp_path: Path, text: str) -> None:
    message = refused(tmp_path / "a.baseline.json", text.replace('"E": 3000.0', '"E": 3001.0').encode())
    assert "its digest differs" in message
    assert "record the behaviour again" in message


def test_a_baseline_of_a_newer_form_says_so(tmp_path: Path, text: str) -> None:
    content = json.loads(text)
    message = refused(tmp_path / "a.baseline.json", resealed(content | {"schema": 2}).encode())
    assert "schema: found 2, expected 1" in message


def test_a_resealed_file_with_columns_of_different_length_is_refused(tmp_path: Path, text: str) -> None:
    content = json.loads(text)
    content["paths"][0]["response"]["time"].pop()
    assert "columns of different length" in refused(tmp_path / "a.baseline.json", resealed(content).encode())


def test_a_resealed_file_whose_path_is_none_is_refused(tmp_path: Path, text: str) -> None:
    content = json.loads(text)
    content["paths"][0]["path"]["mode"] = "sideways"
    assert "unknown mode 'sideways'" in refused(tmp_path / "a.baseline.json", resealed(content).encode())
    content["paths"][0]["path"]["mode"] = "simple shear"
    content["paths"][0]["path"]["start_temperature"] = -1.0
    assert "start_temperature" in refused(tmp_path / "a.baseline.json", resealed(content).encode())


def test_a_resealed_file_with_keys_missing_names_them(tmp_path: Path, text: str) -> None:
    content = json.loads(text)
    del content["paths"][0]["tolerance"]
    assert "paths[1].tolerance" in refused(tmp_path / "a.baseline.json", resealed(content).encode())


def test_a_missing_file_is_named(tmp_path: Path) -> None:
    with pytest.raises(FileError, match=r"none\.baseline\.json"):
        read_baseline(tmp_path / "none.baseline.json")


def killed_at_random(command: list[str], longest: float, rng: np.random.Generator) -> int:
    """Start a process, kill it without warning after a while, and give what it left with."""
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    time.sleep(float(rng.uniform(0.0, longest)))
    process.kill()
    return process.wait()


@pytest.mark.skipif(not hasattr(signal, "SIGKILL"), reason="a POSIX signal")
def test_a_record_that_is_killed_leaves_the_file_whole(tmp_path: Path) -> None:
    card, path, file = (tmp_path / name for name in ("a.card.toml", "a.path.toml", "a.baseline.json"))
    card.write_text(toml(changed({})), encoding="utf-8")
    path.write_text(PATH_FILE, encoding="utf-8")
    command = [sys.executable, "-m", "drivers.cli", "record", str(card), "--path", str(path), "-o", str(file)]
    began = time.monotonic()
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
    longest, before = time.monotonic() - began, file.read_bytes()
    card.write_text(toml(changed({"elastic.E": 2900.0})), encoding="utf-8")
    rng = np.random.default_rng()
    for _ in range(RECORD_KILLS):
        killed_at_random(command, longest, rng)
        baseline = read_baseline(file)  # raises unless every byte is as recorded
        assert baseline.tables["elastic"]["E"] in (3000.0, 2900.0)
        assert baseline.tables["elastic"]["E"] == 2900.0 or file.read_bytes() == before


WRITER = """
import sys
from drivers.baseline_file import read_baseline, write_baseline
one, other = read_baseline(sys.argv[1]), read_baseline(sys.argv[2])
write_baseline(sys.argv[3], one)
print("writing", flush=True)
while True:
    write_baseline(sys.argv[3], other)
    write_baseline(sys.argv[3], one)
"""


@pytest.mark.skipif(not hasattr(signal, "SIGKILL"), reason="a POSIX signal")
def test_a_writer_that_is_killed_while_it_writes_leaves_one_file_or_the_other(tmp_path: Path, text: str) -> None:
    content = json.loads(text)
    content["paths"][0]["tolerance"] = 0.25
    one, other, file = (tmp_path / name for name in ("one.json", "other.json", "a.baseline.json"))
    one.write_bytes(text.encode())
    other.write_bytes(resealed(content).encode())
    command = [sys.executable, "-c", WRITER, str(one), str(other), str(file)]
    rng = np.random.default_rng()
    for _ in range(WRITER_KILLS):
        with subprocess.Popen(command, stdout=subprocess.PIPE) as process:
            assert process.stdout is not None
            assert process.stdout.readline() == b"writing\n"
            time.sleep(float(rng.uniform(0.0, 0.1)))  # a write takes some milliseconds
            process.kill()
        assert process.returncode == -signal.SIGKILL
        assert file.read_bytes() in (one.read_bytes(), other.read_bytes())
        read_baseline(file)
