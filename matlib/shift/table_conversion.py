"""The points of a table of shift factors, written as a law of the WLF, VFT and Arrhenius family."""

from __future__ import annotations

import contextlib
import math
from typing import NamedTuple

import numpy as np

from matlib.errors import ConversionError, PoleError, both_scales
from matlib.shift.akaike import support
from matlib.shift.domain import LARGEST_LN_RATE
from matlib.shift.family_constants import Style
from matlib.shift.fit import ShiftFit, fit_table
from matlib.shift.table import Table

__all__ = ["TableFit", "fit_points"]

_SLACK = 1e-9  # K: rounding of a temperature between units


class TableFit(NamedTuple):
    """A fit to the points of a table, which form they support, what to note, and where the points lie [K]."""

    fit: ShiftFit
    support: str
    note: str
    low: float
    high: float


def fit_points(law: Table, to: str, T_range: tuple[float, float] | None, style: Style) -> TableFit:
    """Fit a form, and the other one to hold it against, to the points of a table.

    Parameters
    ----------
    law : Table
    to : {"wlf", "vft", "arrhenius"}
    T_range : tuple of float or None
        Only points between these temperatures [K], ends included; all of them if None. A point that says 0 at the
        reference of the table is its definition and is kept in any case.
    style : Style

    Returns
    -------
    TableFit

    Raises
    ------
    ConversionError
        With too few points, or where they do not fall with temperature.
    """
    inside = np.ones(law.T.size, dtype=bool)
    if T_range is not None:
        inside = (law.T >= T_range[0] - _SLACK) & (law.T <= T_range[1] + _SLACK)
        if not inside.any():
            span = " to ".join(both_scales(T) for T in T_range)
            raise ConversionError(f"nothing to fit: the table has no point from {span}")
    low, high = float(law.T[inside].min()), float(law.T[inside].max())
    kept = inside | ((law.T == law.T_ref) & (law.log10_a == 0.0))
    if not low < high:  # one point and the anchor, or one point alone, which `fit_table` refuses
        low, high = float(law.T[kept].min()), float(law.T[kept].max())

    def fitted(form: str) -> ShiftFit:
        return fit_table(
            law.T[kept],
            law.log10_a[kept],
            law.T_ref,
            form,
            at=style.at,
            base=style.base,
            gas_constant=style.gas_constant,
        )

    fit = fitted(to)
    fits = [fit]
    with contextlib.suppress(ConversionError, PoleError):  # `support` says what is missing
        fits.append(fitted("wlf" if to == "arrhenius" else "arrhenius"))
    if abs(fit.level) * math.log(10.0) > LARGEST_LN_RATE:
        raise ConversionError(
            f"the reference temperature cannot be moved from {both_scales(law.T_ref)} to {both_scales(style.at)}: "
            f"relaxation times would change by 10^{fit.level:.4g}"
        )
    return TableFit(fit, support(fits), _note(fit, law.T_ref), low, high)


def _note(fit: ShiftFit, T_ref: float) -> str:
    """What became of the level of the curve, and anything else that a reader of the card should know."""
    if fit.anchored:
        text = (
            f"the table holds T_ref = {both_scales(T_ref)} at exactly 0: the curve is held there, and the point is not "
            "counted"
        )
        if fit.law.T_ref != T_ref:
            text += f"; relaxation times were multiplied by a_T of the curve at {both_scales(fit.law.T_ref)}"
    else:
        error = "" if not math.isfinite(fit.level_error) else f" +- {fit.level_error:.2g} (standard error)"
        text = (
            f"the curve is at log10 a_T = {fit.level:.4g}{error} at {both_scales(fit.law.T_ref)}, where the table has no "
            "point at exactly 0: the level is a free constant, and went into the relaxation times, so that a_T is 1 at T_ref"
        )
    return f"{text}; {fit.note}" if fit.note else text
