"""``cardproof sweep``."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from drivers.commands.output import deliver, require_folder, require_picture, save_figure
from drivers.commands.reporting import Report, inputs_of, origin_of
from drivers.processors import processors
from drivers.report.progress import progress
from drivers.report.sweep import sweep_data, sweep_figure, sweep_tables
from drivers.sweep.export import csv_of, parquet_of
from drivers.sweep.plan import plan_of
from drivers.sweep.run import run_sweep
from drivers.sweep.sweep_file import SweepFile, read_sweep
from matlib.errors import ParameterError
from matlib.files import write_atomically

if TYPE_CHECKING:
    from drivers.report.page import Page

__all__ = ["run"]

MOST_PROCESSES = 1024


def run(
    file: str,
    *,
    processes: int | None = None,
    on: str | None = None,
    retry_failed: bool = False,
    csv: str | None = None,
    parquet: str | None = None,
    plot: str | None = None,
    json_file: str | None = None,
    report: Report | None = None,
) -> int:
    """Run what is left of a sweep; exit 0 where every case ran and is within the tolerance."""
    for output in (json_file, csv, parquet):
        require_folder(output)
    require_picture(plot)
    if parquet is not None:
        _require_parquet()
    if processes is not None and not 1 <= processes <= MOST_PROCESSES:
        raise ParameterError("--processes", f"from 1 to {MOST_PROCESSES}", processes)
    sweep = read_sweep(file)
    _require_own(sweep, {"--json": json_file, "--csv": csv, "--parquet": parquet, "--plot": plot})
    plan = plan_of(sweep)
    with progress(plan.sweep.name, len(plan)) as advance:
        result = run_sweep(
            plan, processes=processes or processors(), on=on, retry_failed=retry_failed, progress=advance
        )
    if csv is not None:
        write_atomically(csv, csv_of(result.rows))
    if parquet is not None:
        write_atomically(parquet, parquet_of(result.rows))
    if plot is not None:
        save_figure(sweep_figure(result), plot)

    def page(wanted: Report) -> Page:
        from drivers.report.sweep_page import sweep_page

        swept = plan.sweep
        named = [*((card, "card") for card in swept.cards), *((path, "path") for path in swept.paths)]
        files = [(file, "sweep"), *((str(swept.folder / name), what) for name, what in named)]
        outputs = [(csv, "all rows"), (parquet, "all rows")]
        return sweep_page(result, origin_of(wanted, inputs_of(wanted, files), outputs))

    return deliver(sweep_data(result, csv, parquet), sweep_tables(result), json_file, report, page)


def _require_own(sweep: SweepFile, outputs: dict[str, str | None]) -> None:
    """Refuse to write over what the sweep reads or keeps."""
    kept = {Path(name).resolve() for name in (sweep.file, sweep.database)}
    kept |= {(sweep.folder / name).resolve() for name in (*sweep.cards, *sweep.paths)}
    for option, output in outputs.items():
        if output is not None and Path(output).resolve() in kept:
            raise ParameterError(option, "a file of its own", f"{output!r}, which belongs to the sweep")


def _require_parquet() -> None:
    try:
        import pyarrow  # noqa: F401
    except ImportError:
        hint = "install cardproof[parquet], or use --csv"
        raise ParameterError("--parquet", "given where pyarrow is installed", "no such package", hint) from None
