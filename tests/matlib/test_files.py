import os
import stat

import pytest

import matlib.files as files
from matlib.errors import Fault, FileError
from matlib.files import read_text, read_toml, require_kind, shown, write_atomically


def fault_of(function, file, *arguments):
    """The one fault that `function` finds in `file`, whose name the error keeps as it was given."""
    with pytest.raises(FileError) as caught:
        function(file, *arguments)
    assert caught.value.file == str(file)
    assert len(caught.value.faults) == 1
    return caught.value.faults[0]


def test_text_is_read_with_or_without_a_byte_order_mark(tmp_path):
    file = tmp_path / "a.toml"
    file.write_bytes("name = 'Prüfling'\n".encode())
    assert read_text(file) == "name = 'Prüfling'\n"
    file.write_bytes("name = 'Prüfling'\n".encode("utf-8-sig"))
    assert read_toml(str(file)) == {"name": "Prüfling"}


def test_a_missing_file_is_named(tmp_path):
    fault = fault_of(read_text, tmp_path / "no.card.toml")
    assert (fault.found, fault.expected) == ("nothing", "a file of this name")


def test_a_folder_is_no_file(tmp_path):
    assert fault_of(read_text, tmp_path).found == "a folder"


def test_a_file_below_a_file_is_no_file(tmp_path):
    (tmp_path / "a").write_text("")
    assert fault_of(read_text, tmp_path / "a" / "b").expected == "a file that can be read"


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no named pipes here")
def test_a_pipe_is_refused_and_never_waited_for(tmp_path):
    os.mkfifo(tmp_path / "pipe")
    assert fault_of(read_text, tmp_path / "pipe").found == "a device or pipe"


@pytest.mark.skipif(not os.path.exists("/dev/zero"), reason="no such device here")
def test_a_device_without_end_is_refused():
    assert fault_of(read_text, "/dev/zero").found == "a device or pipe"


def test_a_file_that_may_not_be_read_is_refused(tmp_path, monkeypatch):
    file = tmp_path / "a.toml"
    file.write_text("")

    def refuse(self):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(type(file), "read_bytes", refuse)
    assert fault_of(read_text, file) == Fault(key="file", found="Permission denied", expected="a file that can be read")


@pytest.mark.parametrize("name", ["a\0b", "x" * 5000])
def test_a_name_that_no_file_can_have_is_refused(name):
    assert fault_of(read_text, name).expected == "a file that can be read"
    assert fault_of(write_atomically, name, "x").expected == "a file that can be written"


def test_a_file_that_is_not_utf_8_is_refused_with_the_place(tmp_path):
    file = tmp_path / "a.toml"
    file.write_bytes(b"name = '\xfc'")
    assert fault_of(read_text, file) == Fault(key="file", found="byte 0xfc at 8", expected="UTF-8 text")
    file.write_bytes(bytes(range(256)))
    assert fault_of(read_toml, file).expected == "UTF-8 text"


def test_a_file_that_is_too_large_is_refused_unread(tmp_path, monkeypatch):
    file = tmp_path / "a.toml"
    file.write_text("a = 1234567\n")
    monkeypatch.setattr(files, "LARGEST_FILE", 11)
    assert fault_of(read_text, file) == Fault(key="file", found="12 bytes", expected="at most 11 bytes")
    monkeypatch.setattr(files, "LARGEST_FILE", 12)
    assert read_toml(file) == {"a": 1234567}


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("a = ", "Invalid value"),
        ("a = 1\na = 2\n", "Cannot overwrite a value"),
        ("\0", "Invalid statement"),
        ("a = " + "[" * 100_000, "nesting without end"),
        ("a = 1" + "0" * 5000, "integer string conversion"),
        ("a = 2020-13-45", "a"),
    ],
    ids=["cut off", "key twice", "binary", "nested", "huge integer", "no such day"],
)
def test_what_is_no_toml_is_refused_in_one_line(tmp_path, text, found):
    file = tmp_path / "a.toml"
    file.write_text(text)
    fault = fault_of(read_toml, file)
    assert fault.expected == "valid TOML"
    assert found in fault.found
    assert "\n" not in fault.found
    assert len(fault.found) <= 120


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (-51.6, "-51.6"),
        ("wlf", "'wlf'"),
        ({"a": 1}, "a table"),
        ([1.0, "a\nb"], r"[1.0, 'a\nb']"),
        ("x" * 100, "'" + "x" * 56 + "..."),
    ],
)
def test_values_are_shown_on_one_short_line(value, text):
    assert shown(value) == text


def test_values_that_python_cannot_print_are_shown_all_the_same():
    nested = []
    for _ in range(100_000):
        nested = [nested]
    assert shown(nested) == "an unreadable list"
    assert shown(int("f" * 10_000, 16)) == "a number of thousands of digits"


def test_a_file_is_written_as_given(tmp_path):
    write_atomically(tmp_path / "a.toml", "Prüfling\n")
    assert (tmp_path / "a.toml").read_bytes() == "Prüfling\n".encode()
    write_atomically(str(tmp_path / "a.toml"), b"\x00\xff")
    assert (tmp_path / "a.toml").read_bytes() == b"\x00\xff"
    assert os.listdir(tmp_path) == ["a.toml"]


@pytest.mark.parametrize("step", ["fsync", "chmod", "replace"])
def test_a_write_that_fails_leaves_the_old_file_and_nothing_else(tmp_path, monkeypatch, step):
    file = tmp_path / "a.toml"
    file.write_text("old")

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, step, fail)
    assert fault_of(write_atomically, file, "new").found == "No space left on device"
    assert file.read_text() == "old"
    assert os.listdir(tmp_path) == ["a.toml"]


def test_an_interrupted_write_leaves_the_old_file_and_nothing_else(tmp_path, monkeypatch):
    file = tmp_path / "a.toml"
    file.write_text("old")

    def interrupt(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_atomically(file, "new")
    assert file.read_text() == "old"
    assert os.listdir(tmp_path) == ["a.toml"]


def test_a_folder_that_is_missing_or_in_the_way_is_a_fault(tmp_path):
    assert fault_of(write_atomically, tmp_path / "no" / "a.toml", "x").expected == "a file that can be written"
    assert fault_of(write_atomically, tmp_path, "x").expected == "a file that can be written"


def test_permissions_are_kept_and_new_files_follow_the_mask(tmp_path):
    file = tmp_path / "a.toml"
    file.write_text("old")
    file.chmod(0o640)
    write_atomically(file, "new")
    assert stat.S_IMODE(file.stat().st_mode) == 0o640
    mask = os.umask(0o027)
    try:
        write_atomically(tmp_path / "b.toml", "new")
    finally:
        os.umask(mask)
    assert stat.S_IMODE((tmp_path / "b.toml").stat().st_mode) == 0o640


def test_a_link_is_followed_and_stays_a_link(tmp_path):
    (tmp_path / "a.toml").write_text("old")
    (tmp_path / "link.toml").symlink_to("a.toml")
    write_atomically(tmp_path / "link.toml", "new")
    assert (tmp_path / "link.toml").is_symlink()
    assert (tmp_path / "a.toml").read_text() == "new"


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no named pipes here")
def test_a_pipe_is_written_to_and_not_replaced(tmp_path):
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    reader = os.open(pipe, os.O_RDONLY | os.O_NONBLOCK)
    try:
        write_atomically(pipe, "text")
        assert os.read(reader, 100) == b"text"
    finally:
        os.close(reader)
    assert stat.S_ISFIFO(pipe.stat().st_mode)


def test_a_line_that_is_no_toml_is_shown_with_what_to_write(tmp_path):
    file = tmp_path / "a.card.toml"
    file.write_text("[shift]\nC1 = 17,4\n")
    with pytest.raises(FileError) as caught:
        read_toml(file)
    (fault,) = caught.value.faults
    assert fault.found.startswith("'C1 = 17,4': ")
    assert fault.hint == "write a decimal point in place of the comma"
    file.write_text("a = 1\nb = 2\na = 3\n")
    with pytest.raises(FileError, match="found 'a = 3': Cannot overwrite a value"):
        read_toml(file)


@pytest.mark.parametrize(
    ("keys", "wanted", "kind"),
    [
        ("prony", "path", "card"),
        ("segment", "card", "path"),
        ("python", "card", "routine file"),
        ("cases", "path", "sweep"),
    ],
)
def test_a_file_of_another_kind_is_told_by_its_kind(keys, wanted, kind):
    with pytest.raises(FileError) as caught:
        require_kind({keys: {}}, wanted, "x.toml")
    (fault,) = caught.value.faults
    assert (fault.found, fault.expected) == (f"a {kind}", f"a {wanted}")


def test_a_file_of_the_kind_wanted_or_of_none_is_left_to_its_own_checks():
    require_kind({"prony": {}, "segment": []}, "card", "x.toml")
    require_kind({"name": "x"}, "card", "x.toml")
