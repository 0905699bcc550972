"""Files: read TOML into checked documents with every fault at once; write text atomically."""

from __future__ import annotations

import contextlib
import os
import re
import stat
import tomllib
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError
from pydantic_core import ErrorDetails

from matlib.errors import Fault, FaultyInputError, FileError, FilesError, nearest_hint

__all__ = [
    "Document",
    "gather",
    "read_all",
    "read_text",
    "read_toml",
    "shown",
    "validated",
    "write_atomically",
]

LARGEST_FILE = 64 * 2**20  # bytes; a measured record of a million rows stays below

Read = TypeVar("Read")
DocumentType = TypeVar("DocumentType", bound="Document")


class ContradictionError(ValueError):
    """What a document type's own validator raises: keys that are well formed each, but cannot stand together.

    Parameters
    ----------
    key : str
        Within the table; empty for the table itself.
    found, expected : str
        As in `Fault`.
    """

    def __init__(self, key: str, found: str, expected: str) -> None:
        super().__init__(expected)
        self.key = key
        self.found = found


class Document(BaseModel):
    """Base of all checked file contents: no unknown keys, no silent conversion, no NaN."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False, defer_build=True)


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


_EXPECTED = {
    "float_type": "a number",
    "int_type": "a whole number",
    "int_from_float": "a whole number",
    "string_type": "text in quotes",
    "string_too_short": "text that is not empty",
    "bool_type": "true or false",
    "list_type": "a list",
    "dict_type": "a table",
    "model_type": "a table",
    "model_attributes_type": "a table",
    "finite_number": "a finite number",
}


def _dotted(location: tuple[int | str, ...]) -> str:
    key = ""
    for part in location[:-1] if location[-1:] == ("[key]",) else location:  # a wrong key is itself the last part
        key += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if key else part
    return key or "file"


def _expected(error: ErrorDetails, model: type[BaseModel]) -> tuple[str, str]:
    """What is expected, and a hint."""
    kind, context = error["type"], error.get("ctx", {})
    if kind == "missing":
        return _description(error["loc"], model) or "a value for this key", "add the key"
    if kind == "extra_forbidden":
        known = sorted(_fields(error["loc"][:-1], model))
        hint = nearest_hint(error["loc"][-1], known) or "remove the key"
        return "one of the keys " + ", ".join(known), hint
    if kind == "literal_error":
        return f"one of {context['expected']}", nearest_hint(
            error["input"], re.findall(r"'([^']*)'", context["expected"])
        )
    if kind in ("too_short", "too_long"):
        most = context.get("max_length")
        least = context.get("min_length")
        return (f"at least {least} entries" if kind == "too_short" else f"at most {most} entries"), ""
    if kind in ("greater_than", "greater_than_equal", "less_than", "less_than_equal"):
        sign = {"greater_than": ">", "greater_than_equal": ">=", "less_than": "<", "less_than_equal": "<="}[kind]
        bound = next(value for name, value in context.items() if name in ("gt", "ge", "lt", "le"))
        return f"a number {sign} {bound:g}", ""
    if kind == "value_error":
        return str(context["error"]), ""
    return _EXPECTED.get(kind, error["msg"].lower()), ""


def _model_at(location: tuple[int | str, ...], model: type[BaseModel]) -> type[BaseModel] | None:
    current: type[BaseModel] | None = model
    for part in location:
        if isinstance(part, int):
            continue
        field = current.model_fields.get(part) if current is not None else None
        current = _model_in(field.annotation) if field is not None else None
    return current


def _model_in(annotation: Any) -> type[BaseModel] | None:
    """The first document type inside an annotation such as ``list[X] | None``."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in getattr(annotation, "__args__", ()):
        found = _model_in(inner)
        if found is not None:
            return found
    return None


def _fields(location: tuple[int | str, ...], model: type[BaseModel]) -> list[str]:
    at = _model_at(location, model)
    return [] if at is None else [field.alias or name for name, field in at.model_fields.items()]


def _description(location: tuple[int | str, ...], model: type[BaseModel]) -> str | None:
    at = _model_at(location[:-1], model)
    field = at.model_fields.get(str(location[-1])) if at is not None else None
    return field.description if field is not None else None


def validated(model: type[DocumentType], data: object, prefix: tuple[int | str, ...] = ()) -> DocumentType:
    """Check plain data against a document type.

    Parameters
    ----------
    model : type of Document
    data : object
        Tables as read from a file.
    prefix : tuple, optional
        Where in the file `data` stands.

    Raises
    ------
    FaultyInputError
        With every fault of `data`, keys in full.
    """
    try:
        return model.model_validate(data)
    except ValidationError as error:
        faults = []
        for detail in error.errors(include_url=False):
            expected, hint = _expected(detail, model)
            location = prefix + detail["loc"]
            found = "nothing" if detail["type"] == "missing" else shown(detail["input"])
            contradiction = detail.get("ctx", {}).get("error")
            if isinstance(contradiction, ContradictionError):
                found = contradiction.found
                location = (*location, contradiction.key) if contradiction.key else location
            faults.append(Fault(key=_dotted(location), found=found, expected=expected, hint=hint))
        raise FaultyInputError(faults) from None


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
