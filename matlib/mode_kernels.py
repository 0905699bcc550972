r"""The hereditary kernels of each loading mode: which sum of exponentials leads from what is driven to what responds.

With one clock for shear and bulk, elastic relations hold between Carson transforms (correspondence principle), so every
response at a point is a convolution in reduced time of a sum of exponentials with the driven strain or stress `x` and with the
thermal strain :math:`\theta = \alpha (T - T_{start})`:

.. math:: y(\xi) = \sum_u \int k_u(\xi - \xi')\, du(\xi'), \qquad u \in \{x, \theta, m = x - \theta\}.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from matlib.arrays import FloatArray, frozen
from matlib.effective import (
    equibiaxial_modulus,
    plane_strain_tension_modulus,
    poisson_ratio,
    roots_of_sum,
    uniaxial_strain_modulus,
    uniaxial_stress_modulus,
)
from matlib.interconversion import creep_of
from matlib.prony import CreepSeries, PronySeries

__all__ = ["DRIVEN", "MECHANICAL", "ONE", "THERMAL", "ExpKernel", "ModeResponse", "mode_response"]

DRIVEN, THERMAL, MECHANICAL = "driven", "thermal", "mechanical"
Terms = tuple[tuple[str, "ExpKernel"], ...]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ExpKernel:
    r"""A kernel :math:`k(\xi) = c + b\,\xi + \sum_i a_i \exp(-\xi/\tau_i)` with amplitudes of either sign.

    Parameters
    ----------
    constant, slope : float
        :math:`c`, and :math:`b` in units of :math:`c` a second.
    amplitudes, times : ndarray, shape (n,)
        :math:`a_i`, and :math:`\tau_i` [s at the reference temperature].
    """

    constant: float = 0.0
    slope: float = 0.0
    amplitudes: FloatArray = field(default_factory=lambda: frozen([]))
    times: FloatArray = field(default_factory=lambda: frozen([]))

    @classmethod
    def of(cls, series: PronySeries | CreepSeries) -> ExpKernel:
        """The kernel of a relaxation modulus or of a creep compliance."""
        if isinstance(series, PronySeries):
            return cls(constant=series.equilibrium, amplitudes=series.moduli, times=series.times)
        constant = series.instantaneous_compliance + float(series.compliances.sum())
        amplitudes = frozen(-series.compliances)
        return cls(constant=constant, slope=series.fluidity, amplitudes=amplitudes, times=series.times)

    def at(self, xi: FloatArray) -> FloatArray:
        """Value at reduced times `xi` [s]; of the shape of `xi`."""
        return self.constant + self.slope * xi + np.exp(-np.divide.outer(xi, self.times)) @ self.amplitudes

    def __mul__(self, factor: float) -> ExpKernel:
        return ExpKernel(
            constant=factor * self.constant,
            slope=factor * self.slope,
            amplitudes=frozen(factor * self.amplitudes),
            times=self.times,
        )

    __rmul__ = __mul__

    def __add__(self, other: ExpKernel) -> ExpKernel:
        return ExpKernel(
            constant=self.constant + other.constant,
            slope=self.slope + other.slope,
            amplitudes=frozen(np.concatenate([self.amplitudes, other.amplitudes])),
            times=frozen(np.concatenate([self.times, other.times])),
        )

    def __sub__(self, other: ExpKernel) -> ExpKernel:
        return self + (-1.0) * other


ONE = ExpKernel(constant=1.0)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ModeResponse:
    """Which kernels make each component; components that are not named are zero.

    Parameters
    ----------
    strain, stress : dict of int to tuple of (input, ExpKernel)
        By component (order 11 22 33 23 13 12, engineering shear).
    """

    strain: dict[int, Terms]
    stress: dict[int, Terms]


def _shear_share(G: PronySeries, K: PronySeries, c: float) -> ExpKernel:
    r""":math:`G/(3K + cG)`: at a root :math:`\rho` of the denominator the amplitude is :math:`-D_\rho G(\rho)`."""
    roots = roots_of_sum(c, G, 3.0, K)
    if roots.end > 0.0:
        end = G.equilibrium / (3.0 * K.equilibrium + c * G.equilibrium)
    else:
        viscosity_G, viscosity_K = float(G.moduli @ G.times), float(K.moduli @ K.times)
        end = viscosity_G / (3.0 * viscosity_K + c * viscosity_G)
    return ExpKernel(constant=end, amplitudes=frozen(-roots.first * roots.compliances / c), times=roots.times)


def _poisson(G: PronySeries, K: PronySeries) -> ExpKernel:
    nu = poisson_ratio(G, K)
    return ExpKernel(constant=nu.long_term, amplitudes=nu.amplitudes, times=nu.times)


def _uniaxial_stress(G: PronySeries, K: PronySeries) -> ModeResponse:
    nu, E = _poisson(G, K), ExpKernel.of(uniaxial_stress_modulus(G, K))
    lateral = ((MECHANICAL, -1.0 * nu), (THERMAL, ONE))
    return ModeResponse(
        strain={0: ((DRIVEN, ONE),), 1: lateral, 2: lateral},
        stress={0: ((MECHANICAL, E),)},
    )


def _equibiaxial(G: PronySeries, K: PronySeries) -> ModeResponse:
    modulus = ((MECHANICAL, ExpKernel.of(equibiaxial_modulus(G, K))),)
    through = ((MECHANICAL, -2.0 * _confined_ratio(G, K)), (THERMAL, ONE))
    return ModeResponse(
        strain={0: ((DRIVEN, ONE),), 1: ((DRIVEN, ONE),), 2: through},
        stress={0: modulus, 1: modulus},
    )


def _plane_strain(G: PronySeries, K: PronySeries) -> ModeResponse:
    M1, P = ExpKernel.of(plane_strain_tension_modulus(G, K)), _confined_ratio(G, K)
    M2 = M1 - 2.0 * ExpKernel.of(G)
    return ModeResponse(
        strain={0: ((DRIVEN, ONE),), 2: ((MECHANICAL, -1.0 * P), (THERMAL, ONE + P))},
        stress={
            0: ((MECHANICAL, M1), (THERMAL, -1.0 * M2)),
            1: ((MECHANICAL, M2), (THERMAL, -1.0 * M1)),
        },
    )


def _confined_ratio(G: PronySeries, K: PronySeries) -> ExpKernel:
    """Lateral stress ratio of uniaxial strain, nu/(1-nu) = 1 - 6 G/(3K + 4G)."""
    return ONE - 6.0 * _shear_share(G, K, 4.0)


def _uniaxial_strain(G: PronySeries, K: PronySeries) -> ModeResponse:
    shear, bulk = ExpKernel.of(G), ExpKernel.of(K)
    along = ((DRIVEN, bulk + 4.0 / 3.0 * shear), (THERMAL, -3.0 * bulk))
    across = ((DRIVEN, bulk - 2.0 / 3.0 * shear), (THERMAL, -3.0 * bulk))
    return ModeResponse(strain={0: ((DRIVEN, ONE),)}, stress={0: along, 1: across, 2: across})


def _simple_shear(G: PronySeries, K: PronySeries) -> ModeResponse:
    normal = ((THERMAL, -3.0 * ExpKernel.of(K)),)
    return ModeResponse(
        strain={5: ((DRIVEN, ONE),)},
        stress={0: normal, 1: normal, 2: normal, 5: ((DRIVEN, ExpKernel.of(G)),)},
    )


def _hydrostatic(G: PronySeries, K: PronySeries) -> ModeResponse:
    normal = ((MECHANICAL, 3.0 * ExpKernel.of(K)),)
    return ModeResponse(strain=dict.fromkeys(range(3), ((DRIVEN, ONE),)), stress=dict.fromkeys(range(3), normal))


def _uniaxial_stress_creep(G: PronySeries, K: PronySeries) -> ModeResponse:
    creep = ExpKernel.of(creep_of(uniaxial_stress_modulus(G, K)))
    lateral = ((DRIVEN, _compliance(K) * (1.0 / 9.0) - _compliance(G) * (1.0 / 6.0)), (THERMAL, ONE))
    return ModeResponse(
        strain={0: ((DRIVEN, creep), (THERMAL, ONE)), 1: lateral, 2: lateral}, stress={0: ((DRIVEN, ONE),)}
    )


def _compliance(series: PronySeries) -> ExpKernel:
    return ExpKernel.of(creep_of(series))


def _equibiaxial_creep(G: PronySeries, K: PronySeries) -> ModeResponse:
    plane = ((DRIVEN, _compliance(equibiaxial_modulus(G, K))), (THERMAL, ONE))
    through = ((DRIVEN, _compliance(K) * (2.0 / 9.0) - _compliance(G) * (1.0 / 3.0)), (THERMAL, ONE))
    return ModeResponse(strain={0: plane, 1: plane, 2: through}, stress={0: ((DRIVEN, ONE),), 1: ((DRIVEN, ONE),)})


def _plane_strain_creep(G: PronySeries, K: PronySeries) -> ModeResponse:
    creep, nu = _compliance(plane_strain_tension_modulus(G, K)), _poisson(G, K)
    E = ExpKernel.of(uniaxial_stress_modulus(G, K))
    through = 0.75 * _compliance(K.scaled(3.0).plus(G)) - 0.25 * _compliance(G)
    return ModeResponse(
        strain={0: ((DRIVEN, creep), (THERMAL, ONE + nu)), 2: ((DRIVEN, through), (THERMAL, ONE + nu))},
        stress={0: ((DRIVEN, ONE),), 1: ((DRIVEN, nu), (THERMAL, -1.0 * E))},
    )


def _uniaxial_strain_creep(G: PronySeries, K: PronySeries) -> ModeResponse:
    creep, P = _compliance(uniaxial_strain_modulus(G, K)), _confined_ratio(G, K)
    free = 3.0 * ONE - 12.0 * _shear_share(G, K, 4.0)
    across = ((DRIVEN, P), (THERMAL, -1.0 * ExpKernel.of(equibiaxial_modulus(G, K))))
    return ModeResponse(
        strain={0: ((DRIVEN, creep), (THERMAL, free))}, stress={0: ((DRIVEN, ONE),), 1: across, 2: across}
    )


def _simple_shear_creep(G: PronySeries, K: PronySeries) -> ModeResponse:
    normal = ((THERMAL, -3.0 * ExpKernel.of(K)),)
    return ModeResponse(
        strain={5: ((DRIVEN, _compliance(G)),)}, stress={0: normal, 1: normal, 2: normal, 5: ((DRIVEN, ONE),)}
    )


def _hydrostatic_creep(G: PronySeries, K: PronySeries) -> ModeResponse:
    normal = ((DRIVEN, _compliance(K) * (1.0 / 3.0)), (THERMAL, ONE))
    return ModeResponse(strain=dict.fromkeys(range(3), normal), stress=dict.fromkeys(range(3), ((DRIVEN, ONE),)))


Maker = Callable[[PronySeries, PronySeries], ModeResponse]
RESPONSES: dict[str, tuple[Maker, Maker]] = {
    "uniaxial stress": (_uniaxial_stress, _uniaxial_stress_creep),
    "uniaxial strain": (_uniaxial_strain, _uniaxial_strain_creep),
    "equibiaxial stress": (_equibiaxial, _equibiaxial_creep),
    "plane strain tension": (_plane_strain, _plane_strain_creep),
    "simple shear": (_simple_shear, _simple_shear_creep),
    "hydrostatic": (_hydrostatic, _hydrostatic_creep),
}
"""By mode: the response to a driven strain, and to a driven stress."""


def mode_response(shear: PronySeries, bulk: PronySeries, mode: str, *, stress_driven: bool) -> ModeResponse:
    """Kernels of a loading mode.

    Parameters
    ----------
    shear, bulk : PronySeries
    mode : str
        A named mode.
    stress_driven : bool
        Whether a stress is driven, rather than a strain.

    Returns
    -------
    ModeResponse

    Raises
    ------
    KeyError
        For a mode without a closed response, such as a general mask of components.
    """
    return RESPONSES[mode][stress_driven](shear, bulk)
