import json

import numpy as np
import pytest

from drivers.foreign.failure import RoutineFailureError
from drivers.foreign.replay import read_replay, replay, replay_name, save_replay
from matlib.errors import FileError
from tests.drivers.foreign.faults import KINDS, SEGFAULT, block


@pytest.fixture
def failed(faulty, tmp_path):
    """A failure in increment 40, and the file that it is saved in."""

    def fail(what):
        routine = faulty()
        with pytest.raises(RoutineFailureError) as info:
            routine.run(block(60, 40, what), np.zeros(6), np.zeros(3))
        file = tmp_path / "f.replay.json"
        assert save_replay(info.value, file)
        return info.value, file

    return fail


@pytest.mark.parametrize("what", [SEGFAULT, 4, 6, 8, 10, 14])
def test_a_saved_increment_fails_again(failed, what):
    failure, file = failed(what)
    result = replay(file)
    assert result.reproduced
    assert result.failure.kind == KINDS[what]
    assert result.replay.detail == failure.detail
    assert result.replay.memory.tolist() == failure.memory.tolist() == [40.0, 0.0, 0.0]
    assert np.array_equal(result.replay.increment.strain[1], failure.increment.strain[1])  # not one bit lost


def test_a_routine_that_has_been_mended_is_seen_to_be(failed):
    _, file = failed(SEGFAULT)
    document = json.loads(file.read_text())
    document["increment"]["strain"][1][2] = 0.0
    file.write_text(json.dumps(document))
    result = replay(file)
    assert not result.reproduced
    assert result.update.memory.tolist() == [41.0, 0.0, 0.0]


def test_a_replay_file_names_the_routine_from_its_own_folder(failed, monkeypatch):
    failure, file = failed(6)
    monkeypatch.chdir("/")
    assert not json.loads(file.read_text())["routine"].startswith("/")
    assert read_replay(file).routine_file == failure.routine


def test_a_failure_outside_any_increment_is_not_saved(tmp_path):
    assert not save_replay(RoutineFailureError("x.routine.toml", "crash", "while loading"), tmp_path / "f.replay.json")
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"memory": [1.0]}, "memory: found 1 numbers, expected 3"),
        ({"format": "2"}, "format: found '2'"),
        ({"increment": {}}, "increment.time: found nothing"),
        ({"routine": "none.routine.toml"}, "none.routine.toml: file: found nothing"),
    ],
)
def test_a_damaged_replay_file_is_refused(failed, change, text):
    _, file = failed(6)
    file.write_text(json.dumps(json.loads(file.read_text()) | change))
    with pytest.raises(FileError) as info:
        replay(file)
    assert text in str(info.value)


def test_a_file_that_is_no_json_is_refused(tmp_path):
    (tmp_path / "f.replay.json").write_text("{")
    with pytest.raises(FileError, match="expected valid JSON"):
        read_replay(tmp_path / "f.replay.json")


def test_a_replay_file_is_named_after_the_routine():
    assert replay_name("a/b/new.routine.toml") == "new.replay.json"
