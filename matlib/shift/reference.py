"""Moving the reference temperature of a law: the same behaviour, written from another temperature."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from matlib.arrays import FloatArray, require_positive
from matlib.errors import ConversionError, both_scales
from matlib.shift.arrhenius import Arrhenius
from matlib.shift.base import ShiftLaw
from matlib.shift.crossover import Crossover
from matlib.shift.domain import LARGEST_LN_RATE
from matlib.shift.measured import MeasuredRange
from matlib.shift.none import NoShift
from matlib.shift.polynomial import Polynomial
from matlib.shift.table import Table
from matlib.shift.vft import VFT
from matlib.shift.wlf import WLF

__all__ = ["move_reference", "time_factor"]


def time_factor(law: ShiftLaw, T_new: float) -> float:
    """What every relaxation time is multiplied by when the reference moves to `T_new`: the law's ``a_T`` there.

    Parameters
    ----------
    law : ShiftLaw
        The law with its present reference. A `MeasuredRange` is looked through: the constant between the two
        references is that of the law inside.
    T_new : float
        The new reference temperature [K].

    Raises
    ------
    ConversionError
        If the factor is too large or too small to be written as a double.
    """
    inner = law.law if isinstance(law, MeasuredRange) else law
    ln_factor = float(inner.ln_shift(T_new))
    if abs(ln_factor) > LARGEST_LN_RATE:
        raise ConversionError(
            f"the reference temperature of shift law {law.name} cannot be moved from {both_scales(law.T_ref)} to "
            f"{both_scales(T_new)}: relaxation times would change by 10^{ln_factor / math.log(10.0):.4g}"
        )
    return math.exp(ln_factor)


def move_reference(law: ShiftLaw, T_new: float) -> ShiftLaw:
    r"""The same law with its reference at `T_new`: :math:`\ln a_T(T) - \ln a_T(T_{new})`.

    Every relaxation time must be multiplied by `time_factor` along with it.

    Parameters
    ----------
    law : ShiftLaw
        Any law of this package.
    T_new : float
        The new reference temperature [K].

    Returns
    -------
    moved : ShiftLaw
        Of the same kind. A table keeps its points, each lowered by the same amount.

    Raises
    ------
    ConversionError
        If the law is of a kind that is not known here, a plug-in.
    ShiftRangeError
        If the law has no answer at `T_new`.

    Examples
    --------
    >>> law = move_reference(WLF(C1=17.44, C2=51.6, T_ref=373.15), 423.15)
    >>> round(law.C1, 3), round(law.C2, 3)
    (8.857, 101.6)
    """
    require_positive("T_ref", T_new, "K")
    if isinstance(law, MeasuredRange):
        return replace(law, law=move_reference(law.law, T_new))
    law.ln_shift(T_new)  # raises where the law has no answer
    if isinstance(law, WLF):
        C2 = law.C2 + (T_new - law.T_ref)
        return replace(law, C1=law.C1 * (law.C2 / C2), C2=C2, T_ref=T_new)
    if isinstance(law, Polynomial):
        return Polynomial(coefficients=_recentred(law.coefficients, T_new - law.T_ref), T_ref=T_new)
    if isinstance(law, Table):
        lowered = law.log10_a - float(law.ln_shift(T_new)) / math.log(10.0)
        return Table(T=law.T, log10_a=lowered, T_ref=T_new)
    if isinstance(law, VFT | Arrhenius | Crossover | NoShift):
        return replace(law, T_ref=T_new)
    raise ConversionError(
        f"the reference temperature of shift law {law.name} cannot be moved: its form is not known here"
    )


def _recentred(coefficients: FloatArray, step: float) -> FloatArray:
    """Coefficients 1, 2, ... of the polynomial about a point `step` further on (Horner's scheme)."""
    taylor = np.concatenate(([0.0], coefficients))
    for first in range(taylor.size - 1):
        for k in range(taylor.size - 2, first - 1, -1):
            taylor[k] += step * taylor[k + 1]
    return taylor[1:]
