"""The contract of a shift law."""

from __future__ import annotations

from abc import ABC, abstractmethod

from numpy.typing import ArrayLike

from matlib.arrays import FloatArray
from matlib.shift.quadrature import mean_rate_by_quadrature

__all__ = ["ShiftLaw"]


class ShiftLaw(ABC):
    r"""How relaxation slows or quickens with temperature: :math:`\ln a_T(T)`, zero at `T_ref`.

    A law is immutable. It answers with :math:`\ln a_T`, never with :math:`a_T`, which overflows.
    """

    __slots__ = ()

    @property
    @abstractmethod
    def name(self) -> str:
        """The law's name in files and messages."""

    @property
    @abstractmethod
    def T_ref(self) -> float:
        """Reference temperature [K]."""

    @abstractmethod
    def ln_shift(self, T: ArrayLike) -> FloatArray:
        r"""Natural logarithm of the shift factor.

        Parameters
        ----------
        T : array_like
            Temperature [K].

        Returns
        -------
        ln_a : ndarray
            :math:`\ln a_T`, of the shape of `T`.

        Raises
        ------
        ShiftRangeError
            Where the law has no answer; `PoleError` at or below its pole.
        """

    @property
    def pole(self) -> float | None:
        """The temperature where the law diverges [K], or None."""
        return None

    @property
    def knots(self) -> tuple[float, ...]:
        """Temperatures [K], ascending, between which the law is smooth and monotone."""
        return ()

    def mean_rate(self, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        r"""Mean of :math:`1/a_T` over a straight temperature ramp: reduced time a second of it.

        Parameters
        ----------
        T_start, T_end : array_like
            Temperature at the two ends of each ramp [K]; they broadcast.

        Returns
        -------
        rate : ndarray
            Mean of :math:`1/a_T`, ``>= 0``, of the broadcast shape.

        Notes
        -----
        By adaptive Gauss quadrature, here; laws with a closed form give it in its place.
        """
        return mean_rate_by_quadrature(self.ln_shift, self.knots, T_start, T_end)
