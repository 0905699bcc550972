r"""Prony series: relaxation (generalised Maxwell) and creep (generalised Kelvin-Voigt) as sums of exponentials."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from matlib.arrays import FloatArray, frozen, require_positive
from matlib.errors import ParameterError
from matlib.terms import checked_terms, from_zero, merged_terms, ratios, require_not_negative

__all__ = ["CreepSeries", "PronySeries"]

FULL_SUM = 8.0 * float(np.finfo(np.float64).eps)
"""How far a sum of fractions may lie from 1 and still be 1 to rounding."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PronySeries:
    r"""A relaxation modulus :math:`M(\xi) = M_\infty + \sum_i M_i \exp(-\xi/\tau_i)`.

    Parameters
    ----------
    equilibrium : float
        Long-term modulus :math:`M_\infty` [Pa], ``>= 0``; zero for a liquid.
    moduli : ndarray, shape (n,)
        Moduli :math:`M_i` of the relaxing terms [Pa], ``> 0``; ``n`` may be 0 (elastic).
    times : ndarray, shape (n,)
        Relaxation times :math:`\tau_i` [s at the reference temperature], ``> 0``. Stored ascending, `moduli` with them;
        equal times are kept.

    Raises
    ------
    ParameterError
        If a value or a shape is not as above, or the instantaneous modulus is zero.

    References
    ----------
    N. W. Tschoegl, The Phenomenological Theory of Linear Viscoelastic Behavior (1989), ch. 3 (from memory).

    Examples
    --------
    >>> solid = PronySeries(equilibrium=1.0, moduli=[2.0], times=[5.0])
    >>> solid.instantaneous
    3.0
    >>> float(solid.storage(0.2)), float(solid.loss(0.2))
    (2.0, 1.0)
    """

    equilibrium: float
    moduli: FloatArray
    times: FloatArray

    def __post_init__(self) -> None:
        object.__setattr__(self, "equilibrium", require_not_negative("equilibrium", self.equilibrium, "Pa"))
        moduli, times = checked_terms("moduli", self.moduli, "Pa", self.times)
        object.__setattr__(self, "moduli", moduli)
        object.__setattr__(self, "times", times)
        require_positive("instantaneous modulus", self.instantaneous, "Pa")

    @classmethod
    def from_fractions(cls, instantaneous: float, fractions: ArrayLike, times: ArrayLike) -> Self:
        """Make a series from fractions of the instantaneous modulus.

        Parameters
        ----------
        instantaneous : float
            Instantaneous modulus [Pa], ``> 0``.
        fractions : array_like, shape (n,)
            Fractions [-], ``> 0``, with a sum of at most 1; a sum of 1 to rounding is a liquid, with an equilibrium of
            exactly 0.
        times : array_like, shape (n,)
            Relaxation times [s].

        Raises
        ------
        ParameterError
            If the fractions sum to more than 1, or a value is not as above.

        Examples
        --------
        >>> PronySeries.from_fractions(10.0, [0.25, 0.5], [1.0, 2.0]).equilibrium
        2.5
        """
        modulus = require_positive("instantaneous", instantaneous, "Pa")
        shares, ordered = checked_terms("fractions", fractions, "", times)
        total = math.fsum(shares)
        if total > 1.0 + FULL_SUM:
            hint = "fractions are of the instantaneous modulus here; `from_long_term` takes those of the long-term one"
            raise ParameterError("sum of fractions", "at most 1", total, hint)
        rest = 1.0 - total
        equilibrium = 0.0 if abs(rest) <= FULL_SUM else modulus * rest
        return cls(equilibrium=equilibrium, moduli=modulus * shares, times=ordered)

    @classmethod
    def from_long_term(cls, equilibrium: float, fractions: ArrayLike, times: ArrayLike) -> Self:
        """Make a series from fractions of the long-term modulus; their sum may be any size.

        Parameters
        ----------
        equilibrium : float
            Long-term modulus [Pa], ``> 0``.
        fractions : array_like, shape (n,)
            Fractions [-], ``> 0``.
        times : array_like, shape (n,)
            Relaxation times [s].

        Examples
        --------
        >>> PronySeries.from_long_term(2.0, [3.0], [1.0]).instantaneous
        8.0
        """
        modulus = require_positive("equilibrium", equilibrium, "Pa")
        shares, ordered = checked_terms("fractions", fractions, "", times)
        return cls(equilibrium=modulus, moduli=modulus * shares, times=ordered)

    @classmethod
    def elastic(cls, modulus: float) -> Self:
        """Make a series without relaxing terms from its modulus [Pa]."""
        return cls(equilibrium=require_positive("modulus", modulus, "Pa"), moduli=frozen([]), times=frozen([]))

    @property
    def instantaneous(self) -> float:
        """Instantaneous modulus :math:`M_0` [Pa], the sum of all terms."""
        return math.fsum((self.equilibrium, *self.moduli))

    @property
    def fractions(self) -> FloatArray:
        """Moduli as fractions of the instantaneous modulus [-], shape (n,)."""
        return frozen(self.moduli / self.instantaneous)

    @property
    def viscosity(self) -> float | None:
        r"""Zero-shear viscosity :math:`\sum_i M_i \tau_i` of a liquid [Pa s]; None for a solid."""
        return math.fsum(self.moduli * self.times) if self.equilibrium == 0.0 else None

    def relaxation(self, xi: ArrayLike) -> FloatArray:
        """Relaxation modulus.

        Parameters
        ----------
        xi : array_like
            Reduced time after a unit step of strain [s], ``>= 0``.

        Returns
        -------
        modulus : ndarray
            Stress a unit strain [Pa], of the shape of `xi`.
        """
        decay = np.exp(-ratios("xi", xi, self.times))
        return np.asarray(decay @ self.moduli + self.equilibrium)

    def storage(self, omega: ArrayLike) -> FloatArray:
        r"""Storage modulus :math:`M_\infty + \sum_i M_i x_i^2/(1+x_i^2)`, :math:`x_i = \omega\tau_i`.

        Parameters
        ----------
        omega : array_like
            Angular frequency [rad/s], ``>= 0``. No size of it overflows.

        Returns
        -------
        modulus : ndarray
            Storage modulus [Pa], of the shape of `omega`.
        """
        small, fast = _folded(omega, self.times)
        with np.errstate(under="ignore"):
            square = small * small
            return np.asarray(np.where(fast, 1.0, square) / (1.0 + square) @ self.moduli + self.equilibrium)

    def loss(self, omega: ArrayLike) -> FloatArray:
        r"""Loss modulus :math:`\sum_i M_i x_i/(1+x_i^2)`, :math:`x_i = \omega\tau_i`; see `storage`."""
        small, _ = _folded(omega, self.times)
        with np.errstate(under="ignore"):
            return np.asarray(small / (1.0 + small * small) @ self.moduli)

    def scaled(self, factor: float) -> Self:
        """Multiply every modulus by `factor` [-], ``> 0``."""
        by = require_positive("factor", factor)
        return type(self)(equilibrium=self.equilibrium * by, moduli=self.moduli * by, times=self.times)

    def slowed(self, factor: float) -> Self:
        """Multiply every relaxation time by `factor` [-], ``> 0``, as a shift factor does."""
        times = self.times * require_positive("factor", factor)
        return type(self)(equilibrium=self.equilibrium, moduli=self.moduli, times=times)

    def plus(self, other: PronySeries) -> Self:
        """Sum of two relaxation moduli, as of two springs side by side; equal times merged.

        Examples
        --------
        >>> one = PronySeries(equilibrium=1.0, moduli=[2.0], times=[5.0])
        >>> one.plus(one).moduli.tolist()
        [4.0]
        """
        return type(self)(
            equilibrium=self.equilibrium + other.equilibrium,
            moduli=np.concatenate([self.moduli, other.moduli]),
            times=np.concatenate([self.times, other.times]),
        ).merged()

    def merged(self) -> Self:
        """The same modulus with terms of equal time made one (neighbours within 4 roundings of each other)."""
        moduli, times = merged_terms(self.moduli, self.times)
        return type(self)(equilibrium=self.equilibrium, moduli=moduli, times=times)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CreepSeries:
    r"""A creep compliance :math:`D(\xi) = D_g + \sum_i D_i [1 - \exp(-\xi/\rho_i)] + \phi\,\xi`.

    Parameters
    ----------
    instantaneous_compliance : float
        Glassy compliance :math:`D_g` [1/Pa], ``> 0``.
    compliances : ndarray, shape (n,)
        Compliances :math:`D_i` of the retarded terms [1/Pa], ``> 0``; ``n`` may be 0.
    times : ndarray, shape (n,)
        Retardation times :math:`\rho_i` [s at the reference temperature], ``> 0``. Stored ascending.
    fluidity : float
        Fluidity :math:`\phi`, the reciprocal of the viscosity [1/(Pa s)]; zero for a solid.

    Raises
    ------
    ParameterError
        If a value or a shape is not as above.

    Examples
    --------
    >>> creep = CreepSeries(instantaneous_compliance=1.0, compliances=[3.0], times=[2.0])
    >>> float(creep.creep(0.0)), creep.long_term_compliance
    (1.0, 4.0)
    """

    instantaneous_compliance: float
    compliances: FloatArray
    times: FloatArray
    fluidity: float = 0.0

    def __post_init__(self) -> None:
        glassy = require_positive("instantaneous_compliance", self.instantaneous_compliance, "1/Pa")
        object.__setattr__(self, "instantaneous_compliance", glassy)
        object.__setattr__(self, "fluidity", require_not_negative("fluidity", self.fluidity, "1/(Pa s)"))
        compliances, times = checked_terms("compliances", self.compliances, "1/Pa", self.times)
        object.__setattr__(self, "compliances", compliances)
        object.__setattr__(self, "times", times)

    @property
    def long_term_compliance(self) -> float | None:
        """Compliance after a very long time [1/Pa]; None for a liquid, which flows without end."""
        return math.fsum((self.instantaneous_compliance, *self.compliances)) if self.fluidity == 0.0 else None

    def creep(self, xi: ArrayLike) -> FloatArray:
        """Creep compliance.

        Parameters
        ----------
        xi : array_like
            Reduced time after a unit step of stress [s], ``>= 0``.

        Returns
        -------
        compliance : ndarray
            Strain a unit stress [1/Pa], of the shape of `xi`.
        """
        retarded = -np.expm1(-ratios("xi", xi, self.times)) @ self.compliances
        flow = self.fluidity * np.asarray(xi, dtype=np.float64) if self.fluidity > 0.0 else 0.0
        return np.asarray(self.instantaneous_compliance + retarded + flow)

    def scaled(self, factor: float) -> Self:
        """Multiply every compliance and the fluidity by `factor` [-], ``> 0``."""
        by = require_positive("factor", factor)
        return type(self)(
            instantaneous_compliance=self.instantaneous_compliance * by,
            compliances=self.compliances * by,
            times=self.times,
            fluidity=self.fluidity * by,
        )

    def plus(self, other: CreepSeries) -> Self:
        """Sum of two creep compliances, as of two elements in line; equal times merged."""
        return type(self)(
            instantaneous_compliance=self.instantaneous_compliance + other.instantaneous_compliance,
            compliances=np.concatenate([self.compliances, other.compliances]),
            times=np.concatenate([self.times, other.times]),
            fluidity=self.fluidity + other.fluidity,
        ).merged()

    def merged(self) -> Self:
        """The same compliance with terms of equal time made one (neighbours within 4 roundings of each other)."""
        compliances, times = merged_terms(self.compliances, self.times)
        return type(self)(
            instantaneous_compliance=self.instantaneous_compliance,
            compliances=compliances,
            times=times,
            fluidity=self.fluidity,
        )


def _folded(omega: ArrayLike, times: FloatArray) -> tuple[FloatArray, NDArray[np.bool_]]:
    """The smaller of x and 1/x, and whether that is 1/x, for x = omega tau."""
    with np.errstate(over="ignore", under="ignore"):
        x = np.multiply.outer(from_zero("omega", omega), times)
        fast = x > 1.0
        return np.where(fast, 1.0 / np.where(fast, x, 1.0), x), fast
