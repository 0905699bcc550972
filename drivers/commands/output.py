"""How every command hands over what it found."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from pathlib import Path
from typing import TYPE_CHECKING, Any

from drivers.commands.reporting import Report, write_report
from matlib.errors import Fault, FileError, ParameterError
from matlib.files import write_atomically

if TYPE_CHECKING:
    from matplotlib.figure import Figure
    from rich.console import RenderableType

    from drivers.report.page import Page

__all__ = ["FORMATS", "deliver", "parse_tolerance", "require_picture", "save_figure"]

FORMATS = (".png", ".svg", ".pdf")


def deliver(
    data: dict[str, Any],
    tables: Iterable[RenderableType],
    json_file: str | None,
    report: Report | None = None,
    page: Callable[[Report], Page] | None = None,
) -> int:
    """Show tables, write JSON and the page, and give the exit status that belongs to the verdict.

    Parameters
    ----------
    data : dict
        As made by `report.data`.
    tables : iterable of renderable
    json_file : str or None
        ``-`` writes the JSON, and nothing else, to standard output.
    report : Report, optional
        The page that was asked for.
    page : callable, optional
        Makes it.

    Returns
    -------
    status : int
        0 where the verdict is "holds", else 1.
    """
    from drivers.report.data import json_text

    if json_file is not None:
        text = json_text(data)
        if json_file == "-":
            print(text, end="", flush=True)
        else:
            write_atomically(json_file, text)
    if report is not None and page is not None:
        write_report(report, page)
    if json_file != "-":
        from rich.console import Console

        console = Console(highlight=False, markup=False, emoji=False)
        for table in tables:
            console.print(table)
        if report is not None and page is not None:
            console.print(f"The report is {report.file}.")
    return 0 if data["verdict"] == "holds" else 1


def parse_tolerance(text: str) -> float:
    """Read ``1%`` or ``0.01``.

    Returns
    -------
    tolerance : float
        A fraction, ``> 0``.

    Raises
    ------
    ParameterError
        If it is no number, not finite or not positive.

    Examples
    --------
    >>> parse_tolerance("1%"), parse_tolerance("0.02")
    (0.01, 0.02)
    """
    stripped = text.strip()
    number, scale = (stripped[:-1], 0.01) if stripped.endswith("%") else (stripped, 1.0)
    try:
        value = float(number) * scale
    except ValueError:
        value = -1.0
    if not 0.0 < value < 1e6:
        raise ParameterError("--tolerance", "a number > 0 such as 1% or 0.01", repr(text))
    return value


def require_picture(file: str | None) -> None:
    """Refuse, before any work is done, a picture file that cannot be written."""
    if file is None:
        return
    if Path(file).suffix.lower() not in FORMATS:
        raise ParameterError("--plot", f"a file that ends in {', '.join(FORMATS)}", repr(file))
    require_folder(file)


def require_folder(file: str | None) -> None:
    """Refuse, before any work is done, a file whose folder does not exist."""
    if file is not None and file != "-" and not Path(file).parent.is_dir():
        found = f"no folder {str(Path(file).parent)!r}"
        raise FileError(file, [Fault(key="file", found=found, expected="a folder that exists")])


def save_figure(figure: Figure, file: str) -> None:
    """Write a figure whole, in the format of its ending."""
    import io
    import warnings

    buffer = io.BytesIO()
    with warnings.catch_warnings():  # a letter that the font lacks is drawn as a box
        warnings.filterwarnings("ignore", message="Glyph .* missing", category=UserWarning)
        figure.savefig(buffer, format=Path(file).suffix.lower().lstrip("."), dpi=150)
    write_atomically(file, buffer.getvalue())
