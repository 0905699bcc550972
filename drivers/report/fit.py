"""A fit to the points of a table: what `convert` says about its constants."""

from __future__ import annotations

import math
from typing import Any

from rich.console import RenderableType
from rich.text import Text

from drivers.report.tables import plain_table, temperature_text
from matlib.card_conversion import ConvertedCard
from matlib.shift.fit_statistics import student_quantile
from matlib.units import ENERGY, TEMPERATURE

__all__ = ["fit_data", "fit_tables"]

_CONFIDENCE = 0.95


def _finite(value: float | None) -> float | None:
    return value if value is not None and math.isfinite(value) else None


def _in_units(converted: ConvertedCard) -> list[tuple[str, float, float | None, str]]:
    """Name, value, standard error and unit of each fitted constant, as the new card writes it."""
    fit = converted.conversion.fit
    if fit is None:
        return []
    degree = TEMPERATURE[converted.units["temperature"]]
    rows: list[tuple[str, float, float | None, str]] = []
    for name, error in zip(fit.names, fit.standard_errors.tolist(), strict=True):
        match name:
            case "level":
                rows.append((name, fit.level, _finite(error), "decades"))
            case "C1":
                rows.append((name, converted.shift[name], _finite(error), "decades" if _base(converted) == 10 else "1"))
            case "activation_energy":
                unit = converted.shift["energy_unit"]
                rows.append((name, converted.shift[name], _finite(error / ENERGY[unit].scale), unit))
            case _:
                rows.append((name, converted.shift[name], _finite(error / degree.scale), degree.name))
    return rows


def _base(converted: ConvertedCard) -> int | str:
    return converted.shift.get("base", 10)


def fit_data(converted: ConvertedCard) -> dict[str, Any] | None:
    """How an inexact law was fitted, for JSON; None where nothing was fitted.

    Constants and their standard errors are in the units of the new card; what the points cannot tell is null.
    """
    conversion = converted.conversion
    if conversion.method not in ("least-squares", "minimax"):
        return None
    fit = conversion.fit
    return {
        "method": conversion.method,
        "constants": [
            {"name": name, "value": value, "standard_error": error, "unit": unit}
            for name, value, error, unit in _in_units(converted)
        ],
        "correlation": [] if fit is None else fit.correlation.tolist(),
        "residual_decades": None if fit is None else fit.residual_decades,
        "largest_residual": None if fit is None else {"decades": fit.largest_residual, "at": fit.largest_residual_at},
        "points": None if fit is None else fit.points,
        "degrees_of_freedom": None if fit is None else fit.degrees_of_freedom,
        "aicc": None if fit is None else fit.aicc,
        "support": None if fit is None else conversion.support,
    }


def fit_tables(converted: ConvertedCard) -> list[RenderableType]:
    """Constants with their standard errors, the scatter about the curve, and which form the points support."""
    conversion, fit = converted.conversion, converted.conversion.fit
    if fit is None:
        return []
    quantile = student_quantile(_CONFIDENCE, fit.degrees_of_freedom)
    table = plain_table(
        f"Least squares, {fit.points} points, {fit.degrees_of_freedom} degrees of freedom",
        [
            ("constant", "left"),
            ("value", "right"),
            ("standard error", "right"),
            ("95 % interval", "right"),
            ("", "left"),
        ],
    )
    for name, value, error, unit in _in_units(converted):
        known = error is not None
        shown = f"{error:.3g}" if known else "not known"
        interval = f"+- {error * quantile:.3g}" if error is not None else ""
        table.add_row(name, f"{value:.6g}", shown, interval, "" if unit == "1" else unit)
    return [table, *(Text(line) for line in (_scatter_text(converted), conversion.note, conversion.support) if line)]


def _scatter_text(converted: ConvertedCard) -> str:
    fit = converted.conversion.fit
    if fit is None:
        return ""
    pairs = [
        f"{fit.correlation[i, j]:.4f} ({fit.names[i]}, {fit.names[j]})"
        for i in range(len(fit.names))
        for j in range(i + 1, len(fit.names))
    ]
    at = temperature_text(fit.largest_residual_at, TEMPERATURE[converted.units["temperature"]])
    scatter = "not known without a degree of freedom"
    if fit.residual_decades is not None:
        scatter = f"{fit.residual_decades:.3g} decades"
    text = f"Scatter about the curve: {scatter}; largest residual {fit.largest_residual:+.3g} decades at {at}."
    return f"{text} Correlation: {', '.join(pairs)}." if pairs else text
