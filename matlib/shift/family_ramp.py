"""Reduced times of many laws of the WLF family at once."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from matlib.arrays import FloatArray
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import LARGEST_LN_RATE
from matlib.shift.family import as_vft
from matlib.shift.offset_ramp import mean_rate_below
from matlib.shift.wlf import WLF

__all__ = ["integrated_by_law"]


def integrated_by_law(
    laws: Sequence[ShiftLaw], duration: FloatArray, T_start: FloatArray, T_end: FloatArray
) -> FloatArray | None:
    r"""What the shift rule ``integrated`` gives for each law.

    Parameters
    ----------
    laws : sequence of ShiftLaw
    duration : ndarray, shape (n,)
        [s], ``>= 0``.
    T_start, T_end : ndarray, shape (n,)
        Temperature at the two ends of each increment [K].

    Returns
    -------
    dxi : ndarray, shape (laws, n) or None
        Reduced times [s at the T_ref of each]. None where a law is not of the family, or has no answer to one of the
        temperatures: then ask each law by itself, which tells why.

    Examples
    --------
    >>> from matlib.shift import VFT
    >>> law = WLF(C1=17.44, C2=51.6, T_ref=373.15)
    >>> hot = VFT(B=2000.0, T_inf=321.55, T_ref=373.15)
    >>> integrated_by_law([law, hot], np.ones(1), np.array([373.15]), np.array([383.15])).round(2).tolist()
    [[117.23], [96.59]]
    """
    forms = [as_vft(law) for law in laws]
    if any(form is None for form in forms):
        return None
    B, T_inf, T_ref = np.array(forms, dtype=np.float64).T[:, :, np.newaxis]
    # temperature above the pole is `rise` + (T - `base`): rounded once, as each law does it
    wlf = np.array([[isinstance(law, WLF)] for law in laws])
    rise = np.where(wlf, [[law.C2 if isinstance(law, WLF) else 0.0] for law in laws], 0.0)
    base = np.where(wlf, T_ref, T_inf)
    if T_start.size > 1 and np.all(T_start == T_start[0]) and np.all(T_end == T_start[0]):
        T_start, T_end = T_start[:1], T_end[:1]
    cold, hot = np.minimum(T_start, T_end), np.maximum(T_start, T_end)
    u_cold, u_hot = rise + (cold - base), rise + (hot - base)
    if not (np.all(cold > 0.0) and np.all(np.isfinite(hot)) and np.all(u_cold > 0.0)):
        return None
    with np.errstate(over="ignore", under="ignore"):
        ln_hot = B / (rise + (T_ref - base)) * ((T_ref - hot) / u_hot)
        if not np.all(ln_hot >= -LARGEST_LN_RATE):
            return None
        dxi = duration * (np.exp(-ln_hot) * mean_rate_below(u_cold, u_hot, B))
    return dxi if np.all(np.isfinite(dxi)) else None
