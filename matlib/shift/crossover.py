"""One law below a temperature and another above it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from matlib.arrays import FloatArray, require_positive
from matlib.shift.base import ShiftLaw
from matlib.shift.domain import check_ln_shift, check_temperatures

__all__ = ["Crossover"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Crossover(ShiftLaw):
    r"""Two laws joined continuously: `below` under `at`, `above` from there on.

    Each is moved up or down by a constant, so that both agree at `at` and :math:`\ln a_T` is zero at `T_ref`.

    Parameters
    ----------
    below, above : ShiftLaw
        The two parts, each with constants for its own reference temperature.
    at : float
        Where they meet [K], ``> 0``, above the poles of both.
    T_ref : float, optional
        Reference temperature of the whole [K]; that of `above` if left out.

    Raises
    ------
    ShiftRangeError
        If a part has no answer at `at` or at `T_ref`.

    Examples
    --------
    >>> from matlib.shift import WLF, Arrhenius
    >>> law = Crossover(below=Arrhenius(activation_energy=2e5, T_ref=373.15),
    ...     above=WLF(C1=17.44, C2=51.6, T_ref=373.15), at=373.15)
    >>> law.ln_shift([363.15, 373.15]).round(4)
    array([1.7751, 0.    ])
    """

    below: ShiftLaw
    above: ShiftLaw
    at: float
    T_ref: float = field(default=None)  # type: ignore[assignment]
    _ln_below: float = field(init=False, repr=False)
    _ln_above: float = field(init=False, repr=False)

    def __post_init__(self) -> None:
        at = require_positive("at", self.at, "K")
        if self.T_ref is None:
            object.__setattr__(self, "T_ref", self.above.T_ref)
        require_positive("T_ref", self.T_ref, "K")
        jump = float(self.below.ln_shift(at) - self.above.ln_shift(at))
        if self.T_ref < at:
            ln_below = -float(self.below.ln_shift(self.T_ref))
            ln_above = ln_below + jump
        else:
            ln_above = -float(self.above.ln_shift(self.T_ref))
            ln_below = ln_above - jump
        object.__setattr__(self, "_ln_below", ln_below)
        object.__setattr__(self, "_ln_above", ln_above)

    @property
    def name(self) -> str:
        """``crossover``."""
        return "crossover"

    @property
    def pole(self) -> float | None:
        """The pole of `below` [K]; one of `above` lies under `at` and is never met."""
        return self.below.pole

    @property
    def knots(self) -> tuple[float, ...]:
        """`at`, and the knots of each part on its own side [K]."""
        lower = tuple(T for T in self.below.knots if self.at > T)
        return (*lower, self.at, *(T for T in self.above.knots if self.at < T))

    def ln_shift(self, T: ArrayLike) -> FloatArray:
        """See `ShiftLaw.ln_shift`."""
        T = check_temperatures(self.name, T, self.pole)
        cold = self.at > T
        ln_a = np.empty(T.shape)
        if cold.any():
            ln_a[cold] = self.below.ln_shift(T[cold]) + self._ln_below
        if not cold.all():
            ln_a[~cold] = self.above.ln_shift(T[~cold]) + self._ln_above
        return check_ln_shift(self.name, T, ln_a, self.T_ref)
