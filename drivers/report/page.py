"""One self-contained page: what was asked, the verdict, the figures that decide it, pictures, and the detail behind them."""

from __future__ import annotations

import base64
import hashlib
import io
import platform
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING

from drivers.report.tables import CAUTION
from matlib.version import __version__

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["Fact", "File", "Origin", "Page", "PageTable", "Picture", "file_of", "html", "picture"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Fact:
    """A figure that decides the verdict: what it is, its value with its unit, and what it is held against."""

    label: str
    value: str
    against: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class File:
    """A file that went in or came out: its name, what it is, and the sha256 of its bytes."""

    file: str
    what: str
    digest: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Origin:
    """What a page was made from.

    Parameters
    ----------
    command : str
        To run again, as it was given.
    inputs, outputs : sequence of File
        Read, and written.
    """

    command: str = ""
    inputs: Sequence[File] = ()
    outputs: Sequence[File] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Picture:
    """A picture with its finding in words.

    Parameters
    ----------
    data : str
        SVG as a data address.
    title : str
    finding : str
        What a reader has to see in it; stands under the picture, and in its place for who cannot see it.
    """

    data: str
    title: str
    finding: str

    def renamed(self, title: str) -> Picture:
        """The same picture under another title."""
        return replace(self, title=title)


@dataclass(frozen=True, slots=True, kw_only=True)
class PageTable:
    """A table.

    Parameters
    ----------
    caption : str
    headers : sequence of str
        With units.
    rows : sequence of sequence of str
        The first cell of a row is its heading.
    numeric, wide : sequence of int
        Columns that are set to the right, and columns of sentences.
    """

    caption: str
    headers: Sequence[str]
    rows: Sequence[Sequence[str]]
    numeric: Sequence[int] = ()
    wide: Sequence[int] = ()

    def kind(self, column: int) -> str:
        """How a column is set."""
        return "number" if column in self.numeric else "wide" if column in self.wide else "text"


@dataclass(frozen=True, slots=True, kw_only=True)
class Page:
    """A report.

    Parameters
    ----------
    title : str
        What was compared, and with what.
    holds : bool or None
        The verdict; None for a command that makes something and judges nothing.
    verdict : str
        In a sentence.
    lead : sequence of str
        What to know besides, in sentences.
    facts : sequence of Fact
    pictures : sequence of Picture
    tables : sequence of PageTable
    origin : Origin
    settings : dict of str
        Whatever else reproduces the result.
    tables_first : bool
        Whether tables say more than pictures.
    """

    title: str
    holds: bool | None
    verdict: str
    lead: Sequence[str] = ()
    facts: Sequence[Fact] = ()
    pictures: Sequence[Picture] = ()
    tables: Sequence[PageTable] = ()
    origin: Origin = field(default_factory=Origin)
    settings: dict[str, str] = field(default_factory=dict)
    tables_first: bool = False

    @property
    def word(self) -> str:
        """The verdict in a word."""
        return "Done" if self.holds is None else "Holds" if self.holds else "Falls short"


def file_of(file: str | Path, what: str) -> File:
    """A file with its digest."""
    digest = hashlib.sha256(Path(file).read_bytes()).hexdigest()
    return File(file=str(file), what=what, digest=digest)


def picture(figure: Figure, title: str, finding: str) -> Picture:
    """Turn a figure into a picture of a page: SVG whose text stays text, the same bytes for the same figure."""
    import warnings

    import matplotlib as mpl

    buffer = io.StringIO()
    with mpl.rc_context({"svg.fonttype": "none", "svg.hashsalt": "cardproof"}), warnings.catch_warnings():
        warnings.filterwarnings(
            "ignore", message="Glyph .* missing", category=UserWarning
        )  # the reader's fonts draw it
        figure.savefig(buffer, format="svg", transparent=True, metadata={"Date": None, "Creator": None})
    encoded = base64.b64encode(buffer.getvalue().encode("utf-8")).decode("ascii")
    return Picture(data=f"data:image/svg+xml;base64,{encoded}", title=title, finding=finding)


def versions() -> dict[str, str]:
    """What made the page."""
    import numpy

    return {"cardproof": __version__, "Python": platform.python_version(), "numpy": numpy.__version__}


def html(page: Page, *, made: datetime | None = None) -> str:
    """The page as HTML: one file, no script, no request to anything.

    Parameters
    ----------
    page : Page
    made : datetime, optional
        Now if left out.
    """
    from jinja2 import Environment, StrictUndefined

    source = resources.files("drivers.report").joinpath("page.html.j2").read_text(encoding="utf-8")
    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    stamp = (made or datetime.now(UTC)).strftime("%Y-%m-%d %H:%M UTC")
    return environment.from_string(source).render(page=page, made=stamp, versions=versions(), caution=CAUTION)
