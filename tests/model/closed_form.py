"""A thick-walled cylinder of a material with shear relaxation and elastic bulk, plane strain, under pressure in its bore.

By the correspondence principle: Lame's elastic solution with the shear modulus as the Carson transform of the relaxation modulus
(s times its Laplace transform), times the transform of the pressure, transformed back (R. M. Christensen, Theory of
Viscoelasticity, 2nd ed. 1982, from memory; the formulas below are worked out from the equilibrium of the cylinder).
"""

from dataclasses import dataclass

import mpmath
import numpy as np

from matlib.prony import PronySeries


def lame(G, K, a, b, outside):
    """Of unit pressure at radius `a`: displacement alpha r + beta/r; hoop and radial stress c0 +- c1/r^2; axial stress.

    Stress there is 2 (K + G/3) alpha +- 2 G beta/r^2; minus the pressure in the bore, and the outside at `b` is free or held.
    """
    P, Q = 2 * (K + G / 3), 2 * G
    # Outside: P alpha = Q beta/b^2 where it is free, alpha b = -beta/b where it is held.
    alpha_of_beta = Q / (P * b**2) if outside == "free" else -1 / mpmath.mpf(b) ** 2
    beta = -1 / (P * alpha_of_beta - Q / a**2)
    alpha = alpha_of_beta * beta
    return alpha, beta, P * alpha, Q * beta, 2 * (K - 2 * G / 3) * alpha


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Cylinder:
    """Bore `inner`, outside `outer` [m], which is "free" or "held"; `shear` at the cylinder's temperature, bulk modulus `K` [Pa]."""

    inner: float
    outer: float
    outside: str
    shear: PronySeries
    K: float

    def elastic(self, G: float) -> np.ndarray:
        """Lame's five numbers with an elastic shear modulus, for unit pressure."""
        return np.array([float(x) for x in lame(G, self.K, self.inner, self.outer, self.outside)])

    def after_step(self, time: float, method: str = "talbot") -> np.ndarray:
        """The five numbers at `time` [s] after unit pressure came on at once."""
        if time == 0.0:
            return self.elastic(self.shear.equilibrium + float(np.sum(self.shear.moduli)))
        return self._inverted(time, 1, method)

    def in_ramp(self, time: float, length: float) -> np.ndarray:
        """The five numbers at `time` [s] of a pressure that grows to one over `length` [s] and is held then."""
        late = self._inverted(time - length, 2) if time > length else 0.0
        return (self._inverted(time, 2) - late) / length if time > 0.0 else np.zeros(5)

    def _inverted(self, time: float, power: int, method: str = "talbot") -> np.ndarray:
        """The five numbers for a pressure whose transform is ``s**-power``."""
        terms = list(zip(self.shear.moduli.tolist(), self.shear.times.tolist(), strict=True))

        def transformed(s, k):
            G = self.shear.equilibrium + sum(g * s * tau / (1 + s * tau) for g, tau in terms)
            return lame(G, self.K, self.inner, self.outer, self.outside)[k] / s**power

        with mpmath.workdps(20):
            return np.array(
                [float(mpmath.invertlaplace(lambda s, k=k: transformed(s, k), time, method=method)) for k in range(5)]
            )
