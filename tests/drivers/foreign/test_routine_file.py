import pytest

from drivers.foreign.routine_file import is_routine_file, read_routine_file
from matlib.errors import FileError
from tests.drivers.files import BAD, CARD


@pytest.fixture
def written(tmp_path):
    (tmp_path / "x.so").write_bytes(b"")
    (tmp_path / "a.card.toml").write_text(CARD)
    (tmp_path / "bad.card.toml").write_text(BAD)

    def write(text):
        file = tmp_path / "x.routine.toml"
        file.write_text(text)
        return file

    return write


def lines(file):
    with pytest.raises(FileError) as info:
        read_routine_file(file)
    return info.value.lines()


def test_what_is_left_out_has_a_default(written):
    described = read_routine_file(written('library = "x.so"\nn_memory = 4\n'))
    document = described.document
    assert (described.name, document.order, document.time_limit, document.memory_limit) == ("x", 1.0, 5.0, 4096.0)
    assert (described.loading["symbol"], described.loading["n_memory"]) == ("stress_update", 4)
    assert described.constants.size == 0
    assert (described.stress_unit.name, described.time_unit.name, described.temperature_unit.name) == ("Pa", "s", "K")


def test_the_library_and_the_card_are_named_from_the_folder_of_the_file(written, tmp_path, monkeypatch):
    file = written('name = "new"\nlibrary = "x.so"\nn_memory = 4\nconstants = [1, 2.5]\ncard = "a.card.toml"\n')
    monkeypatch.chdir("/")
    described = read_routine_file(file)
    assert described.loading["library"] == str(tmp_path / "x.so")
    assert described.card.document.name == "resin [a]"
    assert (described.name, described.stress_unit.name, described.temperature_unit.name) == ("new", "MPa", "degC")
    assert described.constants.tolist() == [1.0, 2.5]
    assert not described.constants.flags.writeable


def test_every_fault_is_named_at_once(written):
    found = lines(
        written('library = 3\nn_memory = -1\nconstants = ["a", inf]\norder = 0\ntime_limit = -1.0\ncolour = 1\n')
    )
    text = "\n".join(found)
    for key in ("library", "n_memory", "constants[1]", "constants[2]", "order", "time_limit", "colour"):
        assert f"x.routine.toml: {key}: found" in text
    assert len(found) == 7


def test_faults_of_the_card_and_of_the_library_come_together(written):
    found = "\n".join(lines(written('library = "y.so"\nn_memory = 1\ncard = "bad.card.toml"\n')))
    assert "library: found no file 'y.so'" in found
    assert "card bad.card.toml: prony" in found or "card bad.card.toml: fractions" in found


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "found neither"),
        ('library = "x.so"\nn_memory = 1\npython = "a:b"\n', "found both"),
        ('library = "x.so"\n', "n_memory: found nothing"),
        ('python = "a:b"\nn_memory = 3\n', "n_memory: found 3, expected this key with a library only"),
        ('python = "a:b"\nsymbol = "s"\n', "symbol: found 's'"),
        ('python = "a"\n', "python: found 'a', expected \"module:object\""),
        ('python = "a:b:c"\n', "python: found 'a:b:c'"),
        ('python = "a:import os"\n', "python: found"),
        ('library = "x.so"\nn_memory = 1\ncard = "none.card.toml"\n', "card none.card.toml: file: found nothing"),
    ],
)
def test_keys_that_do_not_belong_together_are_faults(written, text, expected):
    assert any(expected in line for line in lines(written(text)))


def test_reading_a_file_runs_nothing(written, tmp_path):
    (tmp_path / "loud.py").write_text("raise SystemExit('run')\n")
    assert read_routine_file(written('python = "loud:Routine"\n')).loading["folder"] == str(tmp_path)


def test_routine_files_are_told_by_their_ending():
    assert is_routine_file("a/x.routine.toml")
    assert not is_routine_file("a/x.card.toml")
