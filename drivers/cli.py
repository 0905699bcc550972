"""The command line: arguments, files, exit codes; nothing else."""

from __future__ import annotations

import contextlib
import io
import os
import shlex
import sys
from pathlib import Path
from typing import Annotated, Any

import typer
from typer.exceptions import TyperException

from drivers.commands.reporting import Report, require_report
from matlib.errors import CardproofError
from matlib.version import __version__

__all__ = ["app", "main"]

OPTIONS: dict[str, Any] = {"rich_markup_mode": None, "pretty_exceptions_enable": False, "no_args_is_help": False}
app = typer.Typer(**OPTIONS)

INTERRUPTED = 130

CardFile = Annotated[str, typer.Argument(metavar="CARD", help="A card file, *.card.toml.")]
CardFiles = Annotated[list[str], typer.Argument(metavar="CARD...", help="Card files, *.card.toml, or folders of them.")]
PathFile = Annotated[str, typer.Argument(metavar="PATH", help="A path file, *.path.toml.")]
Json = Annotated[
    str | None, typer.Option("--json", metavar="FILE", help="Write the result as JSON; - for standard output.")
]


def _report(context: typer.Context, file: str | None) -> Report | None:
    """Refuse a page that cannot be written, and keep the command as it was given."""
    if file is None:
        return None
    require_report(file)
    return Report(file=file, command=str(context.find_root().obj))


ReportFile = Annotated[
    Any,  # a name on its way in, a Report for the command
    typer.Option(
        "--report",
        metavar="FILE.html",
        parser=str,
        callback=_report,
        help="Write a page to file and to print: verdict, figures, pictures, inputs.",
    ),
]
Plot = Annotated[str | None, typer.Option("--plot", metavar="FILE", help="Draw the result: .png, .svg or .pdf.")]


def _example(command: str) -> str:
    r"""A worked example for the end of a command's help; ``\b`` keeps it on one line, to be copied."""
    return f"\b\nExample, on the files of cardproof demo:\n{command}"


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"cardproof {__version__}")
        raise typer.Exit


@app.callback()
def root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Show the version and leave.")
    ] = False,
) -> None:
    """Prove a linear-viscoelastic material card at one material point.

    Exit status: 0 it holds, 1 it was checked and falls short, 2 the input or the usage is wrong.
    """


@app.command(epilog=_example("cardproof demo cardproof-demo"))
def demo(
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="Where the files go.")] = Path("cardproof-demo"),
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Run the whole job on a made-up case; its files and results go to DIR."""
    from drivers.commands.demo import run

    raise typer.Exit(run(folder, json_file=json, report=report))


@app.command(epilog=_example("cardproof check cardproof-demo/laboratory.card.toml --report check.html"))
def check(cards: CardFiles, json: Json = None, report: ReportFile = None) -> None:
    """Is a card admissible, and does it cover its service window?"""
    from drivers.commands.check import run

    raise typer.Exit(run(cards, json_file=json, report=report))


@app.command(
    epilog=_example(
        "cardproof convert cardproof-demo/laboratory.card.toml --to vft --reference 25degC -o new.card.toml"
    )
)
def convert(
    card: CardFile,
    to: Annotated[str, typer.Option("--to", metavar="LAW", help="wlf, vft, arrhenius or table.")],
    output: Annotated[str, typer.Option("-o", "--output", metavar="NEW", help="The card to write.")],
    reference: Annotated[
        str | None, typer.Option("--reference", metavar="T", help="New reference temperature, as in 25degC.")
    ] = None,
    span: Annotated[
        tuple[str, str] | None, typer.Option("--range", metavar="T1 T2", help="What an inexact conversion is made for.")
    ] = None,
    points: Annotated[int | None, typer.Option("--points", metavar="N", help="Temperatures of a table.")] = None,
    base: Annotated[
        str | None, typer.Option("--base", metavar="BASE", help="10 or e: logarithm of WLF constants.")
    ] = None,
    units: Annotated[
        list[str] | None,
        typer.Option("--units", metavar="UNIT", help="A unit of the new card, as in K; may be repeated."),
    ] = None,
    fit: Annotated[
        str | None,
        typer.Option("--fit", metavar="METHOD", help="least-squares (default from a table's points) or minimax."),
    ] = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Write a card with another shift law, reference temperature or unit."""
    from drivers.commands.convert import run

    raise typer.Exit(
        run(
            card,
            to,
            output,
            reference=reference,
            span=span,
            points=points,
            base=base,
            units=units or [],
            fit=fit,
            json_file=json,
            report=report,
        )
    )


@app.command(
    epilog=_example(
        "cardproof drive cardproof-demo/laboratory.card.toml cardproof-demo/thermal-cycles.path.toml -o history.csv"
    )
)
def drive(
    card: CardFile,
    path: PathFile,
    output: Annotated[
        str | None, typer.Option("-o", "--output", metavar="HISTORY.csv", help="Write every kept row as CSV.")
    ] = None,
    shift_rule: Annotated[
        str | None,
        typer.Option(
            "--shift-rule", metavar="R", help="start, end, middle, mean-rate, mean-log or integrated (default)."
        ),
    ] = None,
    recursion: Annotated[
        str | None,
        typer.Option(
            "--recursion", metavar="R", help="exponential (default), midpoint, trapezoidal or backward-euler."
        ),
    ] = None,
    exact: Annotated[
        bool, typer.Option("--exact", help="The reference solution at the increment ends, with its bound.")
    ] = False,
    keep: Annotated[
        str, typer.Option("--keep", metavar="WHICH", help="all, ends (of segments), or a number: every n-th increment.")
    ] = "all",
    plot: Plot = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Stress, strain and temperature along a path."""
    from drivers.commands.drive import run

    raise typer.Exit(
        run(
            card,
            path,
            output=output,
            shift_rule=shift_rule,
            recursion=recursion,
            exact=exact,
            keep=keep,
            plot=plot,
            json_file=json,
            report=report,
        )
    )


@app.command(
    epilog=_example(
        "cardproof compare cardproof-demo/laboratory.card.toml cardproof-demo/slip.card.toml --report slip.html"
    )
)
def compare(
    card_a: Annotated[str, typer.Argument(metavar="CARD_A", help="The card that counts as right, or a folder.")],
    card_b: Annotated[str, typer.Argument(metavar="CARD_B", help="The card in question, or a folder.")],
    path: Annotated[
        list[str] | None, typer.Option("--path", metavar="PATH", help="A path file; may be repeated. Else the battery.")
    ] = None,
    tolerance: Annotated[
        str, typer.Option("--tolerance", metavar="X", help="1% or 0.01 of the path's peak stress.")
    ] = "1%",
    plot: Plot = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Do two cards say the same thing?"""
    from drivers.commands import either

    raise typer.Exit(
        either.compare(card_a, card_b, paths=path or [], tolerance=tolerance, plot=plot, json_file=json, report=report)
    )


@app.command(
    epilog=_example(
        "cardproof steps cardproof-demo/laboratory.card.toml cardproof-demo/thermal-cycles.path.toml --tolerance 1%"
    )
)
def steps(
    card: CardFile,
    path: PathFile,
    tolerance: Annotated[str, typer.Option("--tolerance", metavar="X", help="1% or 0.01 of the path's peak stress.")],
    shift_rule: Annotated[
        str | None, typer.Option("--shift-rule", metavar="R", help="Only this one; recommends for it.")
    ] = None,
    recursion: Annotated[
        str | None, typer.Option("--recursion", metavar="R", help="Only this one; recommends for it.")
    ] = None,
    plot: Plot = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """How small must the increments of a path be, by update rule?"""
    from drivers.commands.steps import run

    raise typer.Exit(
        run(
            card,
            path,
            tolerance=tolerance,
            shift_rule=shift_rule,
            recursion=recursion,
            plot=plot,
            json_file=json,
            report=report,
        )
    )


@app.command(epilog=_example("cardproof record cardproof-demo/laboratory.card.toml -o laboratory.baseline.json"))
def record(
    card: CardFile,
    path: Annotated[
        list[str] | None, typer.Option("--path", metavar="PATH", help="A path file; may be repeated. Else the battery.")
    ] = None,
    tolerance: Annotated[
        list[str] | None,
        typer.Option("--tolerance", metavar="X", help="1% (default) or 0.01 of a path's peak; once, or once a path."),
    ] = None,
    output: Annotated[
        str | None, typer.Option("-o", "--output", metavar="BASELINE", help="Else X.baseline.json beside X.card.toml.")
    ] = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Store the behaviour of a card as accepted."""
    from drivers.commands.record import run

    raise typer.Exit(
        run(card, paths=path or [], tolerances=tolerance or [], output=output, json_file=json, report=report)
    )


@app.command(epilog=_example("cardproof verify cardproof-demo/slip.card.toml cardproof-demo/laboratory.baseline.json"))
def verify(
    card: Annotated[str, typer.Argument(metavar="CARD", help="A card file, *.card.toml, or a folder of them.")],
    baseline: Annotated[
        str | None, typer.Argument(metavar="BASELINE", help="Else X.baseline.json beside X.card.toml.")
    ] = None,
    spread: Annotated[
        str | None, typer.Option("--spread", metavar="FILE", help="Does the change exceed this calibration's scatter?")
    ] = None,
    samples: Annotated[int, typer.Option("--samples", metavar="N", help="Sampled cards, with --spread.")] = 200,
    seed: Annotated[int, typer.Option("--seed", metavar="N", help="Of the samples.", min=0)] = 0,
    plot: Plot = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Does a card still behave as accepted, and if not, what moved?"""
    from drivers.commands import either

    raise typer.Exit(
        either.verify(
            card, baseline, spread=spread, samples=samples, seed=seed, plot=plot, json_file=json, report=report
        )
    )


@app.command(epilog=_example("cardproof audit cardproof-demo/python.routine.toml --quick"))
def audit(
    routine: Annotated[str | None, typer.Argument(metavar="ROUTINE", help="A routine file, *.routine.toml.")] = None,
    card: Annotated[
        str | None, typer.Option("--card", metavar="CARD", help="The card that the routine is meant to be.")
    ] = None,
    quick: Annotated[bool, typer.Option("--quick", help="Fewer paths: for a loop of editing and compiling.")] = False,
    replay: Annotated[
        str | None, typer.Option("--replay", metavar="FILE", help="Take one increment that failed once more.")
    ] = None,
    plot: Plot = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Is a stress-update routine right?"""
    from drivers.commands.audit import run_either

    raise typer.Exit(
        run_either(routine, replay_file=replay, card_file=card, quick=quick, plot=plot, json_file=json, report=report)
    )


@app.command(epilog=_example("cardproof sweep cardproof-demo/library.sweep.toml --csv results.csv"))
def sweep(
    file: Annotated[str, typer.Argument(metavar="SWEEP", help="A sweep file, *.sweep.toml.")],
    processes: Annotated[
        int | None, typer.Option("--processes", metavar="N", help="Local processes; one a core if left out.")
    ] = None,
    on: Annotated[
        str | None, typer.Option("--on", metavar="ADDRESS", help="A Dask scheduler, as in tcp://host:8786.")
    ] = None,
    retry_failed: Annotated[bool, typer.Option("--retry-failed", help="Run failed cases again.")] = False,
    csv: Annotated[str | None, typer.Option("--csv", metavar="FILE", help="Write all rows as CSV.")] = None,
    parquet: Annotated[str | None, typer.Option("--parquet", metavar="FILE", help="Write all rows as Parquet.")] = None,
    plot: Plot = None,
    json: Json = None,
    report: ReportFile = None,
) -> None:
    """Many cards, paths, rules and sampled constants; stopped or killed, it goes on where it was."""
    from drivers.commands.sweep import run

    raise typer.Exit(
        run(
            file,
            processes=processes,
            on=on,
            retry_failed=retry_failed,
            csv=csv,
            parquet=parquet,
            plot=plot,
            json_file=json,
            report=report,
        )
    )


def main(arguments: list[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    arguments : list of str, optional
        Those of the process if left out.

    Returns
    -------
    status : int
        0 it holds, 1 it was checked and falls short, 2 the input or the usage is wrong; 130 when interrupted, 141 when
        the reader of standard output has gone.
    """
    if isinstance(sys.stdout, io.TextIOWrapper):
        sys.stdout.reconfigure(errors="backslashreplace")  # a name that the terminal cannot spell is no reason to fail
    given = sys.argv[1:] if arguments is None else arguments
    command = typer.main.get_command(_asked_for(given))
    try:
        status = command.main(
            given, prog_name="cardproof", standalone_mode=False, obj=shlex.join(["cardproof", *given])
        )
        if status == INTERRUPTED:  # typer's own answer to an interrupt from the keyboard, which says nothing
            raise KeyboardInterrupt
        return status if isinstance(status, int) else 0
    except TyperException as error:
        return _refused([f"cardproof: {error.format_message()}"])
    except CardproofError as error:
        return _refused(error.lines())
    except (KeyboardInterrupt, typer.Abort):
        return _refused(["cardproof: interrupted"], INTERRUPTED)
    except (
        SystemExit
    ) as leaving:  # never for the usage, which is an exception here: completion shown; else a broken pipe
        return 141 if leaving.code else 0
    except OSError as error:
        _silence()
        return _refused([f"cardproof: standard output: {error.strerror or error}"])
    except MemoryError:
        return _refused(["cardproof: not enough memory; keep fewer rows, or use fewer increments"])


def _asked_for(given: list[str]) -> typer.Typer:
    """The command line with only the command that is named first: making all of them takes a while."""
    named = [info for info in app.registered_commands if info.callback and given[:1] == [info.callback.__name__]]
    if not named:
        return app
    narrowed = typer.Typer(**OPTIONS)
    narrowed.registered_callback, narrowed.registered_commands = app.registered_callback, named
    return narrowed


def _silence() -> None:
    """Send what is left for standard output nowhere, lest the interpreter fail on it once more on its way out."""
    with contextlib.suppress(OSError, ValueError), open(os.devnull, "w") as nowhere:
        os.dup2(nowhere.fileno(), sys.stdout.fileno())


def _refused(lines: list[str], status: int = 2) -> int:
    for line in lines:
        print(" ".join(line.split()), file=sys.stderr)
    return status


if __name__ == "__main__":
    sys.exit(main())
