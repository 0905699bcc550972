"""The page of a command: where it goes, what was read and written, and how to run it again."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from matlib.errors import CardproofError, Fault, FileError, ParameterError

if TYPE_CHECKING:
    from drivers.report.page import File, Origin, Page

__all__ = ["Report", "inputs_of", "origin_of", "require_report", "write_report"]

ENDING = ".html"


@dataclass(frozen=True, slots=True, kw_only=True)
class Report:
    """A page that was asked for.

    Parameters
    ----------
    file : str
        Where it goes.
    command : str
        The command as it was given, quoted for a shell.
    """

    file: str
    command: str


def require_report(file: str) -> None:
    """Refuse, before any work is done, a page that cannot be written."""
    if not file.lower().endswith(ENDING):
        raise ParameterError("--report", f"a file that ends in {ENDING}", repr(file))
    if not Path(file).parent.is_dir():
        found = f"no folder {str(Path(file).parent)!r}"
        raise FileError(file, [Fault(key="file", found=found, expected="a folder that exists")])


def inputs_of(report: Report | None, files: Iterable[tuple[str, str]]) -> tuple[File, ...]:
    """Files and what they are, each with its digest, and with what it names in turn; nothing where there is no page.

    Take them as soon as the files are read: a command may write over one of them.
    """
    if report is None:
        return ()
    from drivers.report.page import file_of

    found: dict[str, str] = {}
    for file, what in files:
        found.setdefault(file, what)
        for other, kind in _named(file):
            found.setdefault(other, kind)
    return tuple(file_of(file, what) for file, what in found.items())


def _named(file: str) -> list[tuple[str, str]]:
    """The files that a path or a routine names: a measured record; a card, a library, a module."""
    from matlib.files import read_toml

    if not file.endswith((".path.toml", ".routine.toml")):
        return []
    try:
        tables = read_toml(file)
    except CardproofError:
        return []
    folder = Path(file).parent
    module = f"{str(tables.get('python', '')).partition(':')[0].replace('.', '/')}.py"
    named = ((tables.get("record"), "record"), (tables.get("card"), "card"), (tables.get("library"), "library"))
    return [
        (str(folder / name), what)
        for name, what in (*named, (module, "module"))
        if isinstance(name, str) and (folder / name).is_file()
    ]


def origin_of(report: Report, inputs: tuple[File, ...], outputs: Iterable[tuple[str | None, str]] = ()) -> Origin:
    """What a page is made from; outputs that were not asked for are None."""
    from drivers.report.page import Origin, file_of

    written = tuple(file_of(file, what) for file, what in outputs if file is not None)
    return Origin(command=report.command, inputs=inputs, outputs=written)


def write_report(report: Report, page: Callable[[Report], Page]) -> None:
    """Make the page and write it whole."""
    from drivers.report.page import html
    from matlib.files import write_atomically

    write_atomically(report.file, html(page(report)))
