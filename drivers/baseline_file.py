"""An accepted behaviour as one JSON file that is read back exactly as it was written, or refused."""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from drivers.baseline_paths import RecordedPath, recorded_path, recorded_table
from drivers.baseline_schema import FORMAT, SCHEMA, BaselineDocument
from matlib.card import Card, parse_card, plain
from matlib.documents import validated
from matlib.errors import CardproofError, Fault, FaultyInputError, FileError
from matlib.files import read_text, write_atomically
from matlib.version import __version__

__all__ = ["Baseline", "RecordedPath", "baseline_text", "read_baseline", "write_baseline"]

RESTORE = "restore the file as it was recorded, line ends untouched, or record the behaviour again"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Baseline:
    """An accepted behaviour.

    Parameters
    ----------
    tables : dict
        The card that was recorded, whole, as plain tables; for information and for naming what moved.
    paths : tuple of RecordedPath
    version : str
        Of the program that recorded it.
    file : str
        Where it was read from.
    """

    tables: dict[str, Any]
    paths: tuple[RecordedPath, ...]
    version: str = __version__
    file: str = ""

    @property
    def card_name(self) -> str:
        """Name and revision of the recorded card."""
        name, revision = str(self.tables.get("name", "")), self.tables.get("revision")
        return f"{name}, revision {revision}" if revision else name

    def card(self) -> Card:
        """The recorded card; `FileError` where it cannot be read any more, as when a plug-in law is gone."""
        return parse_card(self.tables, f"{self.file} (recorded card)")

    @classmethod
    def of(cls, card: Card, paths: tuple[RecordedPath, ...]) -> Baseline:
        """Baseline of a card's responses."""
        return cls(tables=plain(card.document), paths=paths)


def canonical(value: Any, indent: int = 0) -> str:
    """The one way in which a value is written: a list of plain values on one line, all else one entry a line.

    Examples
    --------
    >>> print(canonical({"a": [1.0, 2.5], "b": {}}))
    {
     "a": [1.0, 2.5],
     "b": {}
    }
    """
    pad = "\n" + " " * (indent + 1)
    if isinstance(value, dict) and value:
        entries = (f"{json.dumps(key)}: {canonical(inner, indent + 1)}" for key, inner in value.items())
        return "{" + pad + f",{pad}".join(entries) + "\n" + " " * indent + "}"
    if isinstance(value, list) and any(isinstance(inner, dict | list) for inner in value):
        return "[" + pad + f",{pad}".join(canonical(inner, indent + 1) for inner in value) + "\n" + " " * indent + "]"
    return json.dumps(value, allow_nan=False)


def digest(content: dict[str, Any]) -> str:
    """SHA-256 over the canonical form of everything but the digest itself."""
    rest = {key: value for key, value in content.items() if key != "digest"}
    return "sha256:" + hashlib.sha256(canonical(rest).encode("utf-8")).hexdigest()


def baseline_text(baseline: Baseline) -> str:
    """A baseline as the text of its file.

    Raises
    ------
    FileError
        If a constant of the card has no JSON form (a date, say, that a plug-in law takes).
    """
    content: dict[str, Any] = {
        "format": FORMAT,
        "schema": SCHEMA,
        "version": baseline.version,
        "card": baseline.tables,
        "paths": [recorded_table(recorded) for recorded in baseline.paths],
    }
    try:
        content["digest"] = digest(content)
    except (TypeError, ValueError) as error:
        fault = Fault(key="shift", found=str(error), expected="constants that are finite numbers, texts or lists")
        raise FileError(baseline.card_name, [fault]) from None
    return canonical(content) + "\n"


def write_baseline(file: str | Path, baseline: Baseline) -> None:
    """Write a baseline whole, or leave the file as it was; `FileError` where it cannot be written."""
    write_atomically(file, baseline_text(baseline))


def read_baseline(file: str | Path) -> Baseline:
    """Read a baseline.

    Parameters
    ----------
    file : str or Path

    Returns
    -------
    Baseline

    Raises
    ------
    FileError
        If the file is not, byte for byte, one that `write_baseline` has written: damaged, edited or foreign.
    """
    read_text(file)  # says what is wrong with the file as a file
    data = Path(file).read_bytes()
    content = _content(data, str(file))
    try:
        document = validated(BaselineDocument, content)
        if document.schema_number != SCHEMA:
            expected = f"{SCHEMA}, the form that version {__version__} of cardproof reads"
            fault = Fault(key="schema", found=str(document.schema_number), expected=expected, hint="record again")
            raise FaultyInputError([fault])
        paths = tuple(recorded_path(table.path, table.tolerance, table.response) for table in document.paths)
    except FaultyInputError as error:
        raise error.in_file(str(file)) from None
    except CardproofError as error:  # digest right and content wrong: no writer of ours
        fault = Fault(key="paths", found=str(error), expected="paths as `cardproof record` writes them", hint=RESTORE)
        raise FileError(str(file), [fault]) from None
    return Baseline(tables=document.card, paths=paths, version=document.version, file=str(file))


def _content(data: bytes, file: str) -> dict[str, Any]:
    """What the file says, once it is certain that it says what was recorded."""

    def refused(found: str, expected: str, hint: str = RESTORE) -> FileError:
        return FileError(file, [Fault(key="file", found=found, expected=expected, hint=hint)])

    whole = "a whole baseline as `cardproof record` writes it"
    try:
        content = json.loads(data.decode("utf-8"))
        if not isinstance(content, dict) or content.get("format") != FORMAT:
            raise refused("another kind of file", f'a baseline, which says "format": "{FORMAT}"', "name a baseline")
        text = (canonical(content) + "\n").encode("utf-8")
        expected_digest = digest(content)
    except (ValueError, RecursionError) as error:
        if isinstance(error, FileError):
            raise
        found = "nesting without end" if isinstance(error, RecursionError) else " ".join(str(error).split())
        raise refused(f"damage: {found[:120]}", whole) from None
    if content.get("digest") != expected_digest:
        raise refused("content that is not what was recorded: its digest differs", whole)
    if text != data:
        raise refused("other white space, digits or order than were recorded", whole)
    return content
