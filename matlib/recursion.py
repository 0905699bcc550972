r"""How the hereditary integral is carried over an increment: two functions of :math:`r = \Delta\xi/\tau`.

Over an increment each relaxing term of the stress goes from `h` to ``decay(r) h + gain(r) 2 G_i de``. A recursion is
nothing but these two functions; one kernel serves them all.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from matlib.arrays import FloatArray
from matlib.errors import UnknownNameError
from matlib.packing import AS_GIVEN, Form

__all__ = ["RECURSIONS", "Recursion", "find_recursion"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Recursion:
    r"""A one-step update of one relaxing term.

    Parameters
    ----------
    name : str
        As used on the command line and in results.
    decay, gain : callable
        Array of :math:`r \ge 0` in, array of the same shape out.
    order : int
        Order of convergence in the size of the increment.
    large_r : str
        What happens as `r` grows, in words.
    right_limit : bool
        Whether that is what the integral itself does.
    reference : str
        Source of the formula.
    form : Form, optional
        Compiled functions that give the same; if left out, `decay` and `gain` are evaluated for whole blocks.

    Notes
    -----
    For every member decay(0) = 1, decay'(0) = -1, gain(0) = 1 and ``|decay| <= 1``.
    """

    name: str
    decay: Callable[[FloatArray], FloatArray]
    gain: Callable[[FloatArray], FloatArray]
    order: int
    large_r: str
    right_limit: bool
    reference: str
    form: Form = AS_GIVEN


def _exp(r: FloatArray) -> FloatArray:
    with np.errstate(under="ignore"):
        return np.exp(-r)


def _exp_half(r: FloatArray) -> FloatArray:
    with np.errstate(under="ignore"):
        return np.exp(-0.5 * r)


def _mean_decay(r: FloatArray) -> FloatArray:
    """(1 - exp(-r))/r, with its limit 1 at r = 0; accurate for every r >= 0."""
    safe = np.where(r > 0.0, r, 1.0)
    with np.errstate(under="ignore"):
        return np.where(r > 0.0, -np.expm1(-safe) / safe, 1.0)


def _trapezoidal_decay(r: FloatArray) -> FloatArray:
    return (1.0 - 0.5 * r) / (1.0 + 0.5 * r)


def _trapezoidal_gain(r: FloatArray) -> FloatArray:
    return 1.0 / (1.0 + 0.5 * r)


def _implicit(r: FloatArray) -> FloatArray:
    return 1.0 / (1.0 + r)


RECURSIONS: dict[str, Recursion] = {
    recursion.name: recursion
    for recursion in (
        Recursion(
            name="exponential",
            decay=_exp,
            gain=_mean_decay,
            order=2,
            large_r="right limit: the gain falls as 1/r, as the integral itself does",
            right_limit=True,
            reference="R. L. Taylor, K. S. Pister, G. L. Goudreau, Int. J. Numer. Meth. Eng. 2 (1970) 45-59"
            " (from memory)",
            form=Form.named("exponential"),
        ),
        Recursion(
            name="midpoint",
            decay=_exp,
            gain=_exp_half,
            order=2,
            large_r="the gain underflows: the viscous stress of the increment is lost",
            right_limit=False,
            reference="J. C. Simo, T. J. R. Hughes, Computational Inelasticity (1998), ch. 10 (from memory)",
            form=Form.named("midpoint"),
        ),
        Recursion(
            name="trapezoidal",
            decay=_trapezoidal_decay,
            gain=_trapezoidal_gain,
            order=2,
            large_r="the decay tends to -1: the stress rings from increment to increment",
            right_limit=False,
            reference="trapezoidal rule on the rate equation of one term (textbook)",
            form=Form.named("rational", a=0.5, b=0.5),
        ),
        Recursion(
            name="backward-euler",
            decay=_implicit,
            gain=_implicit,
            order=1,
            large_r="the gain falls as 1/r: right limit, but first order",
            right_limit=True,
            reference="backward Euler rule on the rate equation of one term (textbook)",
            form=Form.named("rational", a=0.0, b=1.0),
        ),
    )
}


def find_recursion(name: str) -> Recursion:
    """Look a recursion up by its name.

    Raises
    ------
    UnknownNameError
        If there is none; lists the known ones.

    Examples
    --------
    >>> find_recursion("exponential").order
    2
    """
    try:
        return RECURSIONS[name]
    except KeyError:
        raise UnknownNameError("recursion", name, RECURSIONS) from None
