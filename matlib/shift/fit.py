"""Constants of the WLF, VFT and Arrhenius laws from a table of measured shift factors, with their standard errors."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import BoolArray, FloatArray, frozen, require_positive
from matlib.errors import ConversionError, ParameterError, PoleError, both_scales
from matlib.shift.base import ShiftLaw
from matlib.shift.family_constants import NAMES, WRITERS, Style, level_gradient
from matlib.shift.fit_statistics import corrected_criterion, student_quantile
from matlib.shift.least_squares import FamilyFit, fit_family
from matlib.shift.minimax import LOWEST_POLE
from matlib.units import GAS_CONSTANT

__all__ = ["FORMS", "ShiftFit", "fit_table"]

FORMS = tuple(NAMES)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ShiftFit:
    r"""A law fitted to measured shift factors, and how well they determine it.

    Parameters
    ----------
    form : str
        One of `FORMS`.
    law : ShiftLaw
        The law, :math:`a_T(T_{ref}) = 1`.
    names : tuple of str
        Of the p constants: ``C1, C2``; ``B, T_inf``; or ``activation_energy``; and ``level`` where it is free.
    values, standard_errors : ndarray
        Shape (p,), in SI units (``level`` in decades). An error is infinite where the points cannot tell: with no
        degree of freedom left, or with the pole at an end of its search.
    correlation : ndarray
        Shape (p, p), of the estimates; 1 on the diagonal.
    level, level_error : float
        :math:`\log_{10} a_T` of the fitted curve at the `T_ref` of the law, in the table's own scale, and its
        standard error, decades.
    anchored : bool
        Whether the curve was held at zero at the table's reference temperature.
    points : int
        That carried information; the anchor is none of them.
    degrees_of_freedom : int
        Points less constants.
    residual_decades : float or None
        Standard deviation of the points about the curve; None without a degree of freedom.
    largest_residual, largest_residual_at : float
        Of the points, with its sign (point less curve), decades; and its temperature [K].
    aicc : float or None
        Corrected Akaike criterion; None with too few points for it.
    pole_error : float
        Standard error of `T_inf` [K]; 0 for ``arrhenius``.
    T_range : tuple of float
        Lowest and highest temperature of the points [K], the anchor included.
    note : str
        What else there is to know.
    """

    form: str
    law: ShiftLaw
    names: tuple[str, ...]
    values: FloatArray
    standard_errors: FloatArray
    correlation: FloatArray
    level: float
    level_error: float
    anchored: bool
    points: int
    degrees_of_freedom: int
    residual_decades: float | None
    largest_residual: float
    largest_residual_at: float
    aicc: float | None
    pole_error: float
    T_range: tuple[float, float]
    note: str = ""

    def half_widths(self, confidence: float = 0.95) -> FloatArray:
        """Half of each constant's confidence interval (Student's t), shape (p,), infinite where there is none."""
        return self.standard_errors * student_quantile(confidence, self.degrees_of_freedom)


def fit_table(
    T: ArrayLike,
    log10_a: ArrayLike,
    T_ref: float,
    form: str,
    *,
    at: float | None = None,
    base: Literal[10, "e"] = 10,
    gas_constant: float = GAS_CONSTANT,
) -> ShiftFit:
    r"""Fit the constants of a shift law to measured shift factors by least squares in :math:`\log_{10} a_T`.

    Parameters
    ----------
    T, log10_a : array_like
        The points, shape (n,): temperatures [K] and decades. A temperature may occur more than once.
    T_ref : float
        Reference temperature of the table [K].
    form : {"wlf", "vft", "arrhenius"}
        The form to write.
    at : float, optional
        Reference temperature of the law [K]; `T_ref` if left out.
    base : {10, "e"}, optional
        Logarithm that ``C1`` is written for.
    gas_constant : float, optional
        [J/(mol K)] that an activation energy is written with.

    Returns
    -------
    ShiftFit

    Raises
    ------
    ConversionError
        With too few points for the form, or where they do not fall with temperature.
    PoleError
        Where the fitted pole lies at or above the reference temperature.

    Notes
    -----
    All points weigh alike and scatter independently. Temperatures count as exact.

    *The reference.* A point at `T_ref` with exactly 0 is the definition of the shift factor there, not a measurement: the
    curve is held at zero there and the point is counted neither among the points nor in the degrees of freedom. Where the
    table has no such point, 0 at `T_ref` has not been measured better than anything else: the level of the curve is a
    free constant. The law itself is 1 at its reference either way; `level` is what relaxation times must take over, for
    the time at a temperature is that of the card times the a_T of the curve.

    *The standard errors* are those of the linearised model, as usual in nonlinear regression (D. M. Bates, D. G. Watts,
    Nonlinear Regression Analysis and Its Applications, 1988, ch. 2; from memory), carried from (level, steepness, bend)
    to the constants by their derivatives. WLF and VFT have one and the same residual: they are one law in two forms.

    Examples
    --------
    >>> from matlib.shift import WLF
    >>> law = WLF(C1=14.2, C2=61.0, T_ref=353.15)
    >>> T = 353.15 + np.linspace(-20.0, 60.0, 9)
    >>> fit = fit_table(T, law.ln_shift(T) / np.log(10.0), 353.15, "wlf")
    >>> fit.names, fit.values.round(9), fit.points, fit.degrees_of_freedom
    (('C1', 'C2'), array([14.2, 61. ]), 8, 6)
    """
    T, y = _checked(T, log10_a, T_ref, form)
    anchor = (np.abs(T - T_ref) <= 1e-9 * T_ref) & (y == 0.0)
    anchored = bool(anchor.any())
    names = NAMES[form] + (() if anchored else ("level",))
    _require_enough(T[~anchor], form, anchored, len(names))
    best = fit_family(
        T[~anchor],
        y[~anchor],
        zero_at=T_ref if anchored else None,
        lowest=float(T.min()),
        T_inf=0.0 if form == "arrhenius" else None,
    )
    if not best.steepness > 0.0:
        raise ConversionError(
            f"the points do not fall with temperature from {both_scales(T.min())} to {both_scales(T.max())}: "
            f"no {form} law comes near them"
        )
    style = Style(T_ref if at is None else require_positive("at", at, "K"), base, gas_constant)
    if style.at <= best.T_inf:
        raise PoleError(form, style.at, best.T_inf)
    return _described(best, T, y, ~anchor, form, names, style)


def _checked(T: ArrayLike, log10_a: ArrayLike, T_ref: float, form: str) -> tuple[FloatArray, FloatArray]:
    if form not in FORMS:
        raise ParameterError("form", f"one of {', '.join(FORMS)}", repr(form))
    require_positive("T_ref", T_ref, "K")
    T, y = np.asarray(T, dtype=np.float64), np.asarray(log10_a, dtype=np.float64)
    if T.ndim != 1 or T.size == 0 or not (np.isfinite(T).all() and T.min() > 0.0):
        raise ParameterError("T", "finite temperatures > 0 K, one for each point", T)
    if y.shape != T.shape or not np.isfinite(y).all():
        raise ParameterError("log10_a", f"finite, one for each of the {T.size} temperatures", y)
    return T, y


def _require_enough(used: FloatArray, form: str, anchored: bool, constants: int) -> None:
    different = np.unique(used).size
    if different >= constants:
        return
    own = f"{len(NAMES[form])} constant{'s' * (len(NAMES[form]) > 1)}"
    if anchored:
        needed, beside = f"{form} has {own} to be found", " beside that at T_ref"
    else:
        level = "the level of the curve is one more, since the table has no point at T_ref with exactly 0"
        needed, beside = f"{form} has {own} to be found, and {level}", ""
    raise ConversionError(
        f"too few points: {needed}; that takes {constants} at different temperatures{beside}, more for standard errors, "
        f"and there {'is' if different == 1 else 'are'} {different}"
    )


def _described(
    best: FamilyFit, T: FloatArray, y: FloatArray, used: BoolArray, form: str, names: tuple[str, ...], style: Style
) -> ShiftFit:
    points, p = int(used.sum()), len(names)
    squares = float(best.residuals @ best.residuals)
    residual = math.sqrt(squares / (points - p)) if points > p else None
    written = WRITERS[form](best, style)
    level = best.value(style.at)
    # the constants, the level and the pole, whether or not they count as constants of this form
    J = np.array([*written.gradients, level_gradient(best, style.at), [0.0, 0.0, 1.0 / best.bend**2]])
    covariance = J @ best.covariance @ J.T
    errors = _errors(covariance, residual, open_ended=bool(best.at_end))
    largest = int(np.argmax(np.abs(best.residuals)))
    return ShiftFit(
        form=form,
        law=written.law,
        names=names,
        values=frozen([*written.constants, level][:p]),
        standard_errors=frozen(errors[:p]),
        correlation=frozen(_correlation(covariance[:p, :p])),
        level=level,
        level_error=float(errors[-2]),
        anchored=len(names) == len(NAMES[form]),
        points=points,
        degrees_of_freedom=points - p,
        residual_decades=residual,
        largest_residual=float(best.residuals[largest]),
        largest_residual_at=float(T[used][largest]),
        aicc=corrected_criterion(squares, points, p, float(np.abs(y).max())),
        pole_error=float(errors[-1]),
        T_range=(float(T.min()), float(T.max())),
        note=_end_note(best),
    )


def _errors(covariance: FloatArray, residual: float | None, *, open_ended: bool) -> FloatArray:
    """Standard errors; infinite where the points cannot tell, and 0 for what is fixed by the form itself."""
    spread = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    scale = math.inf if residual is None else residual
    errors = np.array([scale * s if s > 0.0 else 0.0 for s in spread])
    if open_ended:
        errors[:-2] = errors[-1] = math.inf
    return errors


def _correlation(covariance: FloatArray) -> FloatArray:
    spread = np.sqrt(np.diag(covariance))
    spread[spread == 0.0] = 1.0
    correlation = np.clip(covariance / np.outer(spread, spread), -1.0, 1.0)
    np.fill_diagonal(correlation, 1.0)
    return correlation


def _end_note(best: FamilyFit) -> str:
    if best.at_end == "low":
        return (
            f"the best T_inf lies below {LOWEST_POLE:g} K, where the search ends: the points are nearly straight in T"
        )
    if best.at_end == "high":
        return (
            "the best T_inf lies within 0.001 K of the lowest temperature, where the search ends: the points steepen "
            "there as no law of this form does; look at the lowest ones"
        )
    return ""
