"""Results as tables on the terminal."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING

from rich.table import Table
from rich.text import Text

from matlib.admissibility import Finding, is_admissible
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS
from matlib.units import TIME, Unit, difference_name

if TYPE_CHECKING:
    from rich.console import RenderableType

    from drivers.difference import Where
    from drivers.history import History
    from drivers.studies.compare import Comparison, PathComparison
    from drivers.studies.slips import Slip
    from drivers.subject import Subject
    from matlib.card import Card
    from matlib.card_conversion import ConvertedCard

__all__ = [
    "CAUTION",
    "comparison_tables",
    "conversion_tables",
    "findings_table",
    "history_tables",
    "percent",
    "place_text",
    "plain_table",
    "remaining_text",
    "slip_tables",
    "temperature_text",
    "time_text",
    "verdict_line",
]

CAUTION = "This checks a card at one material point, not a part; qualification, tests and licensed practice decide."

SLIPS_SHOWN = 4
ROWS_SHOWN = 24
STYLES = {"error": "bold red", "warning": "yellow", "note": "cyan"}


def plain_table(title: str, columns: Sequence[tuple[str, str]]) -> Table:
    """An empty table; columns are (heading, "left" or "right")."""
    table = Table(title=title, title_justify="left", title_style="bold", box=None, pad_edge=False, padding=(0, 2, 0, 0))
    for heading, side in columns:
        table.add_column(heading, justify="right" if side == "right" else "left", overflow="fold")
    return table


def give_way(table: Table, least: Mapping[int, int]) -> Table:
    """Let these columns wrap, down to some width, where the terminal is narrow; no other does."""
    for number, column in enumerate(table.columns):
        column.no_wrap = number not in least
        column.min_width = least.get(number)
    return table


def verdict_line(holds: bool, text: str) -> Text:
    """The verdict, first thing to be read."""
    return Text.assemble(("holds" if holds else "falls short", "bold green" if holds else "bold red"), f": {text}")


def percent(fraction: float) -> str:
    """A fraction in percent, three figures."""
    return "0 %" if fraction == 0.0 else f"{100.0 * fraction:.3g} %"


def time_text(seconds: float) -> str:
    """A time in the unit that suits its size.

    Examples
    --------
    >>> time_text(5400.0), time_text(0.02)
    ('1.5 h', '0.02 s')
    """
    for name, least in (("d", 2.0), ("h", 1.0), ("min", 2.0)):
        value = TIME[name].from_si(seconds)
        if value >= least:
            return f"{value:.3g} {name}"
    return f"{seconds:.3g} s"


def temperature_text(kelvin: float, unit: Unit) -> str:
    """A temperature in a unit."""
    return f"{unit.from_si(kelvin):.4g} {unit.name}"


def findings_table(card: Card, findings: Sequence[Finding]) -> list[RenderableType]:
    """Findings of one card."""
    counts = {severity: sum(f.severity == severity for f in findings) for severity in STYLES}
    summary = ", ".join(f"{n} {name}{'s' if n > 1 else ''}" for name, n in counts.items() if n) or "no findings"
    lines: list[RenderableType] = [verdict_line(is_admissible(list(findings)), f"{card.name} ({card.file}): {summary}")]
    if findings:
        table = plain_table("", [("severity", "left"), ("finding", "left"), ("what and what to do", "left")])
        table.columns[0].no_wrap = table.columns[1].no_wrap = True
        for finding in findings:
            style = STYLES[finding.severity]
            table.add_row(Text(finding.severity, style=style), finding.id, Text(finding.message))
        lines.append(table)
    return lines


def conversion_tables(converted: ConvertedCard, file: str, unit: Unit) -> list[RenderableType]:
    """What a conversion made."""
    conversion = converted.conversion
    if conversion.exact:
        line = Text.assemble(("exact", "bold green"), f": {file} says what {converted.source} says, to rounding")
    else:
        at = "" if conversion.error_at is None else f" at {temperature_text(conversion.error_at, unit)}"
        text = f": {file} is at most {conversion.largest_error_decades:.3g} decades of a_T off{at}"
        if conversion.fitted_range is not None:
            low, high = (temperature_text(T, unit) for T in conversion.fitted_range)
            text += f", over {low} to {high}"
        line = Text.assemble(("inexact", "bold yellow"), text)
    lines = [line]
    if converted.service_error is not None:
        decades, T = converted.service_error
        beyond = f"Over the whole service window it is up to {decades:.3g} decades off, at {temperature_text(T, unit)}."
        lines.append(Text(beyond))
    table = plain_table("", [("constant", "left"), ("value", "right"), ("unit", "left")])
    for key, value in converted.shift.items():
        shown = f"{value:.10g}" if isinstance(value, float) else str(value)
        if key == "points":
            shown = f"{len(value)} points"
        table.add_row(key, shown, _constant_unit(key, converted))
    if conversion.time_factor != 1.0:
        table.add_row("times multiplied by", f"{conversion.time_factor:.10g}", "-")
    return [*lines, table]


def _constant_unit(key: str, converted: ConvertedCard) -> str:
    """Unit of a constant of the new card."""
    temperature = converted.units["temperature"]
    match key:
        case "T_ref" | "T_inf" | "measured":
            return temperature
        case "C2" | "B":  # differences, which a reader must not shift to another zero
            return difference_name(temperature)
        case "activation_energy":
            return str(converted.shift.get("energy_unit", "kJ/mol"))
        case "gas_constant":
            return "J/(mol K)"
        case "points":
            return f"{temperature}, -"
        case "C1" | "base":
            return "-"
    return ""


def _thinned(count: int) -> list[int]:
    """Row numbers to show, first and last among them, -1 for a gap."""
    if count <= ROWS_SHOWN:
        return list(range(count))
    half = ROWS_SHOWN // 2
    return [*range(half), -1, *range(count - half, count)]


def history_tables(history: History, title: str, stress: Unit, temperature: Unit) -> list[RenderableType]:
    """A history at its rows (best kept at segment ends); only components that are not zero throughout."""
    strains, stresses = history.strain_components, stress.from_si(history.stress_components)
    shown = [c for c in range(6) if abs(strains[:, c]).max() > 0.0]
    loaded = [c for c in range(6) if abs(history.stress_components[:, c]).max() > 1e-12 * (history.peak_stress or 1.0)]
    columns = [("segment", "left"), ("time [s]", "right"), (f"T [{temperature.name}]", "right")]
    columns += [(f"{STRAIN_COMPONENTS[c]} [-]", "right") for c in shown]
    columns += [(f"{STRESS_COMPONENTS[c]} [{stress.name}]", "right") for c in loaded]
    if history.bound is not None:
        columns.append((f"bound [{stress.name}]", "right"))
    table = plain_table(title, columns)
    for row in _thinned(len(history)):
        if row < 0:
            table.add_row(*["..."] * len(columns))
            continue
        T = temperature.from_si(history.temperature[row])
        cells = [history.segment[row], f"{history.time[row]:.6g}", f"{T:.4g}"]
        cells += [f"{strains[row, c]:.4g}" for c in shown] + [f"{stresses[row, c]:.5g}" for c in loaded]
        if history.bound is not None:
            cells.append(f"{stress.from_si(float(history.bound[row])):.2g}")
        table.add_row(*cells)
    return [table]


def comparison_tables(
    comparison: Comparison, a: Subject, b: Subject, slips: Sequence[Slip] = ()
) -> list[RenderableType]:
    """Verdict, likely slips, shift laws, paths: the worst first."""
    worst = comparison.worst
    return [
        verdict_line(comparison.holds, f"{' and '.join(told_apart(a, b))} are {_same_text(comparison, worst)}"),
        *slip_tables(slips),
        Text(_shift_text(comparison, a.temperature_unit)),
        *([Text(_bound_text(comparison))] if comparison.same != "identical" else []),
        _paths_table(_worst_first(comparison.paths), a),
    ]


def told_apart(a: Subject, b: Subject) -> tuple[str, str]:
    """The names of two, each with its file where one name would stand for both."""
    if a.name != b.name or a.file == b.file:
        return a.name, b.name
    return f"{a.name} ({a.file})", f"{b.name} ({b.file})"


def slip_tables(slips: Sequence[Slip]) -> list[RenderableType]:
    """The likely slips, the best explanation first."""
    lines: list[RenderableType] = []
    for slip in slips[:SLIPS_SHOWN]:
        left = f"{remaining_text(slip)}."
        twins = f" The evidence cannot tell it from {', '.join(slip.twins)}." if slip.twins else ""
        lines.append(Text.assemble((f"Likely slip: {slip.id}. ", "bold"), f"{slip.explanation} {left}{twins}"))
    return lines


def remaining_text(slip: Slip) -> str:
    """What is left of a difference without a slip."""
    if slip.remaining <= 1e-9:
        return "Without it nothing but rounding is left"
    return f"Without it {percent(slip.remaining)} of the peak is left"


def _same_text(comparison: Comparison, worst: PathComparison) -> str:
    difference = worst.difference
    if difference is None:
        return f"different: no answer on path {worst.path.name!r}"
    if comparison.same == "identical":
        largest = max(p.rounding for p in comparison.paths)
        return f"identical to rounding (largest difference {percent(difference.relative)}, rounding bound {percent(largest)})"
    text = f"{percent(difference.relative)} of the peak {difference.quantity} apart on path {worst.path.name!r}"
    if comparison.same == "different":
        return f"different: {text}"
    return f"within the tolerance of {percent(comparison.tolerance)}: at most {text}"


def _shift_text(comparison: Comparison, unit: Unit) -> str:
    shift = comparison.shift
    if shift.decades is None or shift.temperature is None:
        return f"Shift laws: {shift.reason}"
    at = temperature_text(shift.temperature, unit)
    return f"Shift laws, both taken as 1 at one temperature: at most {shift.decades:.3g} decades apart, at {at}"


def _bound_text(comparison: Comparison) -> str:
    judged = [result for result in comparison.paths if not result.identical and result.difference is not None]
    largest = max((result.bound for result in judged), default=0.0)
    kind = "estimated" if any(result.estimated for result in judged) else "guaranteed"
    bound = f", {kind} to {percent(largest)}" if largest > 0.0 else ""
    text = f"Differences are between {comparison.basis}{bound}."
    if comparison.judges_increments and comparison.same == "different":
        text += " Part of them may come from the increments; steps on the routine and the path tells how much."
    return text


def _worst_first(paths: Iterable[PathComparison]) -> list[PathComparison]:
    return sorted(paths, key=lambda p: float("-inf") if p.relative is None else -p.relative)


def place_text(at: Where, unit: Unit) -> str:
    """Segment, time and temperature in one phrase."""
    return f"{at.segment}, {time_text(at.time)}, {temperature_text(at.temperature, unit)}"


def _paths_table(paths: Sequence[PathComparison], a: Subject) -> Table:
    columns = [("path", "left"), ("difference", "right"), ("in", "left"), ("largest at", "left"), ("", "left")]
    table = give_way(plain_table("", columns), {0: 14, 3: 14})
    for result in paths:
        mark = Text("holds", style="green") if result.holds else Text("differs", style="red")
        if result.identical:
            mark = Text("identical", style="green")
        difference = result.difference
        if difference is None:
            table.add_row(result.path.name, "no answer", "", result.reason, mark)
            continue
        where = "" if difference.value == 0.0 else place_text(difference.at, a.temperature_unit)
        table.add_row(result.path.name, percent(difference.relative), difference.component, where, mark)
    return table
