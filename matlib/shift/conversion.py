"""One shift law written as another: exactly where that can be, as a fit with its largest error elsewhere."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal, NamedTuple

import numpy as np

from matlib.arrays import FloatArray, require_positive
from matlib.errors import ConversionError, ParameterError, both_scales
from matlib.shift.arrhenius import Arrhenius
from matlib.shift.base import ShiftLaw
from matlib.shift.difference import chebyshev_temperatures, largest_difference_decades, largest_value
from matlib.shift.family import VftConstants, as_vft
from matlib.shift.family_constants import Style
from matlib.shift.fit import FORMS, ShiftFit
from matlib.shift.measured import MeasuredRange
from matlib.shift.minimax import LOWEST_POLE, best_amplitude, best_pole, family_function
from matlib.shift.reference import move_reference, time_factor
from matlib.shift.table import Table
from matlib.shift.table_conversion import fit_points
from matlib.shift.vft import VFT
from matlib.shift.wlf import WLF
from matlib.units import GAS_CONSTANT

__all__ = ["TARGETS", "Conversion", "FitMethod", "convert_law", "fits_points", "largest_difference_decades"]

TARGETS = ("wlf", "vft", "arrhenius", "table")
_ZERO_POLE = 1e-10  # K: a pole this near 0 K changes ln a_T by T_inf (1/T + 1/T_ref) of itself, below 1e-12 above 200 K
Base = Literal[10, "e"]
FitMethod = Literal["least-squares", "minimax"]
_COARSE, _FINE = 400, 4000
_POINTS = 25


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Conversion:
    """What a conversion gives.

    Parameters
    ----------
    law : ShiftLaw
        The new law, normalised at its own `T_ref`.
    time_factor : float
        What every relaxation time must be multiplied by; 1 where the reference stays.
    exact : bool
        Whether the new law is the old one to rounding.
    largest_error_decades : float
        Largest error of ``log10 a_T`` over `fitted_range`, the time factor allowed for; 0 where exact.
    error_at : float, optional
        Where it occurs [K].
    fitted_range : (float, float), optional
        The temperatures [K] that the new law was made for; None where exact.
    note : str
        What a reader of the new card should know besides.
    method : str
        How an inexact law was found: ``least-squares``, ``minimax`` or ``sampled``; empty where exact.
    fit : ShiftFit, optional
        Constants with their standard errors, of a least-squares fit to the points of a table.
    support : str
        Which form those points support, in a sentence.
    """

    law: ShiftLaw
    time_factor: float
    exact: bool
    largest_error_decades: float = 0.0
    error_at: float | None = None
    fitted_range: tuple[float, float] | None = None
    note: str = ""
    method: str = ""
    fit: ShiftFit | None = None
    support: str = ""


class _Style(NamedTuple):
    """What a new law is written with."""

    base: Base
    gas_constant: float

    @property
    def ln_base(self) -> float:
        return 1.0 if self.base == "e" else math.log(10.0)


def convert_law(
    law: ShiftLaw,
    to: str,
    *,
    T_ref: float | None = None,
    base: Base | None = None,
    T_range: tuple[float, float] | None = None,
    points: int | None = None,
    gas_constant: float | None = None,
    fit: FitMethod | None = None,
) -> Conversion:
    r"""Write a shift law in another form, about another reference temperature, or both.

    Parameters
    ----------
    law : ShiftLaw
        A `MeasuredRange` is looked through, and put around the new law again.
    to : str
        ``wlf``, ``vft``, ``arrhenius`` or ``table``; or the law's own name, to move its reference alone.
    T_ref : float, optional
        The new reference temperature [K]; the old one if left out.
    base : {10, "e"}, optional
        Of the logarithm of a new ``C1``; that of the old one, or 10, if left out.
    T_range : (float, float), optional
        Temperatures [K] that an inexact conversion is made for. If left out, the measured range, where there is one.
        With outside = ``refuse`` or ``hold`` only the measured part of it counts, since nothing else is ever used.
    points : int, optional
        Number of temperatures that a table samples, 2 or more; 25 if left out. The reference is one more.
    gas_constant : float, optional
        [J/(mol K)] that a new activation energy is written with; that of the old one, or CODATA's, if left out.
    fit : {"least-squares", "minimax"}, optional
        How constants are found where no exact ones exist. If left out, least squares on the points of a table (those
        within `T_range`, which may be left out), minimax for any other law.

    Returns
    -------
    Conversion

    Raises
    ------
    ConversionError
        If there is no such conversion, it needs `T_range` and has none, or least squares has no or too few points.
    ShiftRangeError
        If `law` has no answer at the new reference or in `T_range`; `PoleError` at its pole.

    Notes
    -----
    Exact: a moved reference, WLF and VFT into each other, Arrhenius into either, and either into Arrhenius where the
    pole is at 0 K. Else the largest error of :math:`\log_{10} a_T` is made least, with :math:`a_T(T_{ref}) = 1` kept; or
    the sum of squares at the points of a table, see `fit_table`.

    Examples
    --------
    >>> result = convert_law(VFT(B=1000.0, T_inf=200.0, T_ref=300.0), "wlf", base="e")
    >>> result.exact, result.law
    (True, WLF(C1=10.0, C2=100.0, T_ref=300.0, base='e'))
    """
    if isinstance(law, MeasuredRange):
        span = _measured_part(law, T_range)
        result = convert_law(
            law.law, to, T_ref=T_ref, base=base, T_range=span, points=points, gas_constant=gas_constant, fit=fit
        )
        return replace(result, law=replace(law, law=result.law))
    T_new = law.T_ref if T_ref is None else require_positive("T_ref", T_ref, "K")
    if to not in TARGETS and to != law.name:
        raise ConversionError(f"a shift law {law.name} cannot be written as {to!r}: use one of {', '.join(TARGETS)}")
    style = _Style(
        base=base or (law.base if isinstance(law, WLF) else 10),
        gas_constant=gas_constant or (law.gas_constant if isinstance(law, Arrhenius) else GAS_CONSTANT),
    )
    if isinstance(law, Table) and fits_points(law, to, fit):
        return _by_least_squares(law, to, T_range, Style(T_new, style.base, style.gas_constant))
    factor = time_factor(law, T_new)
    constants = as_vft(law)
    if constants is not None and (to in ("wlf", "vft") or (to == "arrhenius" and abs(constants.T_inf) <= _ZERO_POLE)):
        return Conversion(law=_exactly(law, constants, to, T_new, style), time_factor=factor, exact=True)
    if to == law.name and not (to == "table" and points is not None):
        return Conversion(law=move_reference(law, T_new), time_factor=factor, exact=True)
    if fit == "least-squares" and to != "table":
        raise ConversionError(f"least squares needs the points of a table, and shift law {law.name} has none")
    low, high = _checked_range(law, to, T_range)
    made, note = (
        (_sampled(law, T_new, low, high, points), "") if to == "table" else _fitted(law, to, T_new, low, high, style)
    )
    error, at = _largest_error(law, made, float(law.ln_shift(T_new)), low, high)
    return Conversion(
        law=made,
        time_factor=factor,
        exact=False,
        largest_error_decades=error,
        error_at=at,
        fitted_range=(low, high),
        note=note,
        method="sampled" if to == "table" else "minimax",
    )


def fits_points(law: ShiftLaw, to: str, fit: FitMethod | None) -> bool:
    """Whether a conversion is least squares on the points of a table, and so needs no range."""
    inner = law.law if isinstance(law, MeasuredRange) else law
    return isinstance(inner, Table) and to in FORMS and fit != "minimax"


def _by_least_squares(law: Table, to: str, T_range: tuple[float, float] | None, style: Style) -> Conversion:
    if T_range is not None:
        T_range = _checked_range(law, to, T_range)
    found = fit_points(law, to, T_range, style)
    ln_factor = found.fit.level * math.log(10.0)
    error, at = _largest_error(law, found.fit.law, ln_factor, found.low, found.high)
    return Conversion(
        law=found.fit.law,
        time_factor=math.exp(ln_factor),
        exact=False,
        largest_error_decades=error,
        error_at=at,
        fitted_range=(found.low, found.high),
        note=found.note,
        method="least-squares",
        fit=found.fit,
        support=found.support,
    )


def _measured_part(law: MeasuredRange, T_range: tuple[float, float] | None) -> tuple[float, float]:
    if T_range is None:
        return law.low, law.high
    if law.outside == "extrapolate":
        return T_range
    low, high = max(law.low, T_range[0]), min(law.high, T_range[1])
    if not low < high:
        raise ConversionError(
            f"nothing to fit: the range {T_range[0]:g} K to {T_range[1]:g} K and the measured range {law.low:g} K to "
            f'{law.high:g} K have no part in common, and outside = "{law.outside}"'
        )
    return low, high


def _checked_range(law: ShiftLaw, to: str, T_range: tuple[float, float] | None) -> tuple[float, float]:
    if T_range is None:
        raise ConversionError(
            f"writing shift law {law.name} as {to} is not exact: give the temperature range that it is to be made for"
        )
    low, high = T_range
    require_positive("T_range", low, "K")
    if require_positive("T_range", high, "K") <= low:
        raise ParameterError("T_range", "two temperatures, the lower first", f"{low:g} K to {high:g} K")
    return low, high


def _exactly(law: ShiftLaw, constants: VftConstants, to: str, T_new: float, style: _Style) -> ShiftLaw:
    moved = move_reference(law, T_new)
    if to == "wlf" and isinstance(moved, WLF):  # not by way of the pole, which would cost a rounding
        return moved if moved.base == style.base else replace(moved, C1=moved.ln_C1 / style.ln_base, base=style.base)
    if to == "vft" and isinstance(moved, VFT):
        return moved
    return _written(to, constants.B, constants.T_inf, T_new, style)


def _written(to: str, B: float, T_inf: float, T_ref: float, style: _Style) -> ShiftLaw:
    """A member of the family in the form that is asked for."""
    if to == "vft":
        return VFT(B=B, T_inf=T_inf, T_ref=T_ref)
    if to == "wlf":
        C2 = T_ref - T_inf
        return WLF(C1=B / C2 / style.ln_base, C2=C2, T_ref=T_ref, base=style.base)
    energy = B * style.gas_constant
    return Arrhenius(activation_energy=energy, T_ref=T_ref, gas_constant=style.gas_constant)


def _fitted(law: ShiftLaw, to: str, T_new: float, low: float, high: float, style: _Style) -> tuple[ShiftLaw, str]:
    def sample(count: int) -> tuple[FloatArray, FloatArray]:
        T = chebyshev_temperatures(low, high, count, law.knots)
        return T, law.ln_shift(T) - law.ln_shift(T_new)

    fine = sample(_FINE)
    T_inf = 0.0 if to == "arrhenius" else best_pole(sample(_COARSE), fine, T_new)
    B, _ = best_amplitude(fine[1], family_function(fine[0], T_inf, T_new))
    if not B > 0.0:
        raise ConversionError(
            f"shift law {law.name} does not fall with temperature from {both_scales(low)} to {both_scales(high)}: "
            f"no {to} law comes near it"
        )
    note = ""
    if T_inf <= LOWEST_POLE * (1.0 - 1e-9):
        note = f"the best T_inf lies below {LOWEST_POLE:g} K, where the search ends: the law is nearly straight in T"
    return _written(to, B, T_inf, T_new, style), note


def _sampled(law: ShiftLaw, T_new: float, low: float, high: float, points: int | None) -> Table:
    count = _POINTS if points is None else points
    if count < 2:
        raise ParameterError("points", ">= 2", points)
    T = np.linspace(low, high, count)
    T = np.sort(np.append(T[np.abs(T - T_new) > 1e-6 * (high - low)], T_new))
    return Table(T=T, log10_a=(law.ln_shift(T) - law.ln_shift(T_new)) / math.log(10.0), T_ref=T_new)


def _largest_error(law: ShiftLaw, made: ShiftLaw, ln_factor: float, low: float, high: float) -> tuple[float, float]:
    def error(T: FloatArray) -> FloatArray:
        return np.abs(law.ln_shift(T) - ln_factor - made.ln_shift(T)) / math.log(10.0)

    knots = (*law.knots, *made.knots)
    middles = 0.5 * (np.asarray(knots[1:]) + np.asarray(knots[:-1]))
    grid = chebyshev_temperatures(low, high, 10 * _COARSE + 1, (*knots, *middles.tolist()))
    return largest_value(error, grid)
