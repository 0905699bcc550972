"""Which form of the shift law measured points support, by the corrected Akaike criterion."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import NamedTuple

from matlib.shift.fit import ShiftFit
from matlib.shift.fit_statistics import student_quantile

__all__ = ["AkaikeWeights", "akaike_weights", "support"]

CLEAR = 0.9
"""Weight from which a form counts as supported: 9 to 1, a difference of 4.4 in the criterion; a convention of ours."""

_OFFSET = "an offset temperature (WLF or VFT, which are one law in two forms)"


class AkaikeWeights(NamedTuple):
    """Share of the support that each form gets; they add up to 1."""

    offset: float
    arrhenius: float


def akaike_weights(fits: Iterable[ShiftFit]) -> AkaikeWeights | None:
    """Weights of the offset family and of plain Arrhenius; None where one is missing or has no criterion."""
    offset, plain = _pair(fits)
    if offset is None or plain is None or offset.aicc is None or plain.aicc is None:
        return None
    difference = min(max(plain.aicc - offset.aicc, -1400.0), 1400.0)
    return AkaikeWeights(1.0 / (1.0 + math.exp(-0.5 * difference)), 1.0 / (1.0 + math.exp(0.5 * difference)))


def support(fits: Iterable[ShiftFit]) -> str:
    """Say which form the data support.

    Parameters
    ----------
    fits : iterable of ShiftFit
        Of the same points: ``arrhenius`` and one of ``wlf`` and ``vft`` (they are one law: of both, one counts).

    Returns
    -------
    sentence : str

    Notes
    -----
    An offset temperature is supported from a weight of 0.9. Plain Arrhenius is the member of the family with T_inf = 0 K, so
    that an offset always fits as well: however many the points, the criterion gives the simpler form hardly more than
    e : 1. It is supported where its weight is the larger and the points also confine T_inf, with 95 % confidence, to half
    of the lowest temperature about 0 K, far from where an offset law of a polymer or a glass has its pole. Otherwise the
    data do not tell: a large weight of plain Arrhenius beside an open T_inf is the price that the criterion puts on a
    constant where points are few, and no evidence against an offset.
    """
    fits = list(fits)
    offset, plain = _pair(fits)
    if offset is None or plain is None:
        return "The data do not tell which form is right: the points are too few, or do not fall, for one of the two forms."
    weights = akaike_weights(fits)
    if weights is None:
        needed = len(offset.names) + 3
        beside = " beside T_ref" if offset.anchored else ""
        return (
            f"The data do not tell {_OFFSET} from plain Arrhenius: the corrected Akaike criterion needs {needed} points"
            f"{beside}, and there are {offset.points}."
        )
    shares = f"Akaike weights {_share(weights.offset)} (offset) and {_share(weights.arrhenius)} (Arrhenius)"
    low, high = _pole_interval(offset)
    pole = f"T_inf lies between {_kelvin(low)} and {_kelvin(high)} with 95 % confidence"
    if not (math.isfinite(low) and math.isfinite(high)):
        pole = "T_inf stays open"
    if weights.offset >= CLEAR:
        below = (
            ", below absolute zero: the points bend less than Arrhenius does" if (offset.law.pole or 0.0) < 0.0 else ""
        )
        return f"The data support {_OFFSET} against plain Arrhenius: {shares}; {pole}{below}."
    confined = max(abs(low), abs(high)) < 0.5 * offset.T_range[0]
    if weights.arrhenius > 0.5 and confined:
        gain = "gains nothing that is worth its constant"
        return f"The data support plain Arrhenius; {_OFFSET} {gain}: {shares}; {pole}."
    if weights.arrhenius >= CLEAR:
        shares += ", which only reflects that the points are few for one constant more"
    return f"The data do not tell {_OFFSET} from plain Arrhenius: {shares}; {pole}."


def _kelvin(T: float) -> str:
    return f"{round(T, 2) + 0.0:.6g} K"


def _share(weight: float) -> str:
    if weight < 0.001:
        return "below 0.001"
    return "above 0.999" if weight > 0.999 else f"{weight:.3f}"


def _pair(fits: Iterable[ShiftFit]) -> tuple[ShiftFit | None, ShiftFit | None]:
    offset, plain = None, None
    for fit in fits:
        if fit.form == "arrhenius":
            plain = fit
        else:
            offset = fit
    return offset, plain


def _pole_interval(fit: ShiftFit) -> tuple[float, float]:
    half = fit.pole_error * student_quantile(0.95, fit.degrees_of_freedom)
    return (fit.law.pole or 0.0) - half, (fit.law.pole or 0.0) + half
