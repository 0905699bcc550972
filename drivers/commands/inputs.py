"""Reading what a command was given: all files, with all their faults at once."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TypeVar

from matlib.errors import FileError, FilesError

__all__ = ["read_all"]

Read = TypeVar("Read")


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
    """Run every task, or raise the file faults of all of them."""
    results, errors = [], []
    for task in tasks:
        try:
            results.append(task())
        except FileError as error:
            errors.append(error)
    if errors:
        raise FilesError(errors)
    return results
