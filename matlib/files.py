"""Files: read as text or TOML, and replaced whole; every fault of every file at once."""

from __future__ import annotations

import contextlib
import os
import re
import stat
import tomllib
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any, TypeVar

from matlib.errors import Fault, FileError, FilesError

__all__ = ["gather", "read_all", "read_text", "read_toml", "require_kind", "shown", "shown_text", "write_atomically"]

LARGEST_FILE = 64 * 2**20  # bytes; a measured record of a million rows stays below

Read = TypeVar("Read")


def shown(value: object, width: int = 60) -> str:
    """A value as a message shows it: one line, cut where it is long."""
    try:
        text = "a table" if isinstance(value, dict) else repr(value)
    except (ValueError, RecursionError):  # an integer of thousands of digits; nesting without end
        text = "a number of thousands of digits" if isinstance(value, int) else f"an unreadable {type(value).__name__}"
    text = " ".join(text.split())
    return text if len(text) <= width else text[: width - 3] + "..."


def read_text(file: str | Path) -> str:
    """Content of a text file.

    Parameters
    ----------
    file : str or Path

    Returns
    -------
    text : str

    Raises
    ------
    FileError
        If it is missing, no regular file, not readable, larger than `LARGEST_FILE` or not UTF-8.
    """
    path, name = Path(file), str(file)

    def fault(found: str, expected: str, hint: str = "") -> FileError:
        return FileError(name, [Fault(key="file", found=found, expected=expected, hint=hint)])

    try:
        status = path.stat()
        if not stat.S_ISREG(status.st_mode):
            kind = "a folder" if stat.S_ISDIR(status.st_mode) else "a device or pipe"
            raise fault(kind, "a text file")
        if status.st_size > LARGEST_FILE:
            raise fault(f"{status.st_size} bytes", f"at most {LARGEST_FILE} bytes")
        return path.read_bytes().decode("utf-8-sig")
    except FileError:
        raise
    except FileNotFoundError:
        raise fault("nothing", "a file of this name", "check the spelling and the folder") from None
    except UnicodeDecodeError as error:
        raise fault(f"byte 0x{error.object[error.start]:02x} at {error.start}", "UTF-8 text") from None
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        raise fault(reason, "a file that can be read") from None


def read_toml(file: str | Path) -> dict[str, Any]:
    """Content of a TOML file as plain tables; `FileError` where it is none."""
    text = read_text(file)
    try:
        return tomllib.loads(text)
    except (ValueError, RecursionError) as error:
        found, hint = ("nesting without end", "") if isinstance(error, RecursionError) else _bad_line(text, str(error))
        raise FileError(str(file), [Fault(key="file", found=found, expected="valid TOML", hint=hint)]) from None


def _bad_line(text: str, message: str) -> tuple[str, str]:
    """What the reader of TOML says, with the line that it means, and a hint."""
    found, at = " ".join(message.split()), re.search(r"at line (\d+)", message)
    lines = text.splitlines()
    if at is None or not 0 < int(at[1]) <= len(lines):
        return shown_text(found), ""
    line = lines[int(at[1]) - 1].strip()
    comma = re.search(r"=\s*[-+]?\d+,\d", line)
    return f"{shown(line)}: {shown_text(found)}", "write a decimal point in place of the comma" if comma else ""


KEYS_OF_KINDS = {
    "card": {"elastic", "prony", "shift"},
    "path": {"segment", "record"},
    "routine file": {"library", "python"},
    "sweep": {"cases"},
}


def require_kind(data: dict[str, Any], wanted: str, file: str) -> None:
    """Raise `FileError` where the tables of a file are those of another kind: its faults one by one would not tell."""
    if data.keys() & KEYS_OF_KINDS[wanted]:
        return
    for kind, keys in KEYS_OF_KINDS.items():
        if data.keys() & keys:
            hint = "look at the order of the arguments"
            raise FileError(file, [Fault(key="file", found=f"a {kind}", expected=f"a {wanted}", hint=hint)])


def shown_text(text: str, width: int = 120) -> str:
    """Text cut to a width."""
    return text if len(text) <= width else text[: width - 3] + "..."


def write_atomically(file: str | Path, content: str | bytes) -> None:
    """Write a file whole, or leave it as it was.

    Parameters
    ----------
    file : str or Path
        A link is followed; a device or pipe is written to directly.
    content : str or bytes
        Text is written as UTF-8.

    Raises
    ------
    FileError
        If the folder is missing or cannot be written.
    """
    data = content.encode("utf-8") if isinstance(content, str) else content
    try:
        path = Path(file).resolve()
        if path.exists() and not (path.is_file() or path.is_dir()):
            path.write_bytes(data)
        else:
            _replace(path, data)
    except (OSError, ValueError) as error:
        found = (error.strerror if isinstance(error, OSError) else None) or str(error)
        fault = Fault(key="file", found=found, expected="a file that can be written", hint="check the folder")
        raise FileError(str(file), [fault]) from None


def _replace(path: Path, data: bytes) -> None:
    import tempfile

    handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.", suffix=".part")
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(data)
            stream.flush()
            os.fsync(stream.fileno())
        mode = path.stat().st_mode & 0o777 if path.exists() else 0o666 & ~_umask()
        os.chmod(temporary, mode)
        os.replace(temporary, path)
    except BaseException:
        with contextlib.suppress(OSError):
            os.unlink(temporary)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def read_all(reader: Callable[[str], Read], files: Sequence[str]) -> list[Read]:
    """Read every file, or raise the faults of all of them.

    Parameters
    ----------
    reader : callable
        Takes a file's name; raises `FileError`.
    files : sequence of str

    Raises
    ------
    FilesError
        If any file has a fault.
    """
    return gather([lambda file=file: reader(file) for file in files])  # type: ignore[misc]


def gather(tasks: Sequence[Callable[[], Read]]) -> list[Read]:
    """Run every task, or raise the file faults of all of them (`FilesError`)."""
    results, errors = [], []
    for task in tasks:
        try:
            results.append(task())
        except FileError as error:
            errors.append(error)
    if errors:
        raise FilesError(errors)
    return results
