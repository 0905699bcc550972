"""Elastic constants of an isotropic solid: any two give all four."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from matlib.arrays import require_finite, require_positive
from matlib.errors import ParameterError

__all__ = ["ElasticConstants", "elastic_constants", "require_poisson_ratio"]


@dataclass(frozen=True, slots=True, kw_only=True)
class ElasticConstants:
    """The four constants of one isotropic solid.

    Parameters
    ----------
    E, G, K : float
        Young's, shear and bulk modulus [Pa], ``> 0``.
    nu : float
        Poisson ratio [-], in (-1, 0.5).
    """

    E: float
    G: float
    K: float
    nu: float


def elastic_constants(
    *, E: float | None = None, G: float | None = None, K: float | None = None, nu: float | None = None
) -> ElasticConstants:
    """All four elastic constants from any two.

    Parameters
    ----------
    E, G, K : float, optional
        Young's, shear and bulk modulus [Pa], ``> 0``.
    nu : float, optional
        Poisson ratio [-], in (-1, 0.5).

    Returns
    -------
    constants : ElasticConstants
        The two given ones unchanged.

    Raises
    ------
    ParameterError
        If not exactly two are given, one is out of its range, or the two belong to no solid: ``E`` must be below
        ``9 K`` (where ``G`` grows without bound) and below ``3 G`` (where ``K`` does).

    References
    ----------
    Isotropic Hooke's law (textbook).

    Examples
    --------
    >>> elastic_constants(E=3.0, nu=0.25)
    ElasticConstants(E=3.0, G=1.2, K=2.0, nu=0.25)
    """
    given = {
        name: _checked(name, value) for name, value in (("E", E), ("G", G), ("K", K), ("nu", nu)) if value is not None
    }
    if len(given) != 2:
        raise ParameterError("elastic constants", "exactly two of E, G, K, nu", ", ".join(given) or "none")
    values = _FROM_PAIR["+".join(given)](*given.values())
    return ElasticConstants(**{**values, **given})


def require_poisson_ratio(value: float) -> float:
    """Return `value` as a float, or raise `ParameterError` where it is not in (-1, 0.5)."""
    number = require_finite("nu", value)
    if not -1.0 < number < 0.5:
        raise ParameterError("nu", "above -1 and below 0.5", value)
    return number


def _checked(name: str, value: float) -> float:
    return require_poisson_ratio(value) if name == "nu" else require_positive(name, value, "Pa")


def _from_E_and_G(E: float, G: float) -> dict[str, float]:
    if not E < 3.0 * G:
        raise ParameterError("E", f"below 3 G = {3.0 * G:g} Pa, where nu would be 0.5", E)
    return {"K": E * G / (3.0 * (3.0 * G - E)), "nu": require_poisson_ratio((E - 2.0 * G) / (2.0 * G))}


def _from_E_and_K(E: float, K: float) -> dict[str, float]:
    if not E < 9.0 * K:
        raise ParameterError("E", f"below 9 K = {9.0 * K:g} Pa, where nu would be -1", E)
    return {"G": 3.0 * K * E / (9.0 * K - E), "nu": require_poisson_ratio((3.0 * K - E) / (6.0 * K))}


def _from_E_and_nu(E: float, nu: float) -> dict[str, float]:
    return {"G": E / (2.0 * (1.0 + nu)), "K": E / (3.0 * (1.0 - 2.0 * nu))}


def _from_G_and_K(G: float, K: float) -> dict[str, float]:
    return {"E": 9.0 * K * G / (3.0 * K + G), "nu": require_poisson_ratio((3.0 * K - 2.0 * G) / (2.0 * (3.0 * K + G)))}


def _from_G_and_nu(G: float, nu: float) -> dict[str, float]:
    return {"E": 2.0 * G * (1.0 + nu), "K": 2.0 * G * (1.0 + nu) / (3.0 * (1.0 - 2.0 * nu))}


def _from_K_and_nu(K: float, nu: float) -> dict[str, float]:
    return {"E": 3.0 * K * (1.0 - 2.0 * nu), "G": 3.0 * K * (1.0 - 2.0 * nu) / (2.0 * (1.0 + nu))}


_FROM_PAIR: dict[str, Callable[[float, float], dict[str, float]]] = {
    "E+G": _from_E_and_G,
    "E+K": _from_E_and_K,
    "E+nu": _from_E_and_nu,
    "G+K": _from_G_and_K,
    "G+nu": _from_G_and_nu,
    "K+nu": _from_K_and_nu,
}
