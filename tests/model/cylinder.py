"""The model of a quarter of a thick-walled cylinder, its load history, and how far it is from the closed form."""

from dataclasses import dataclass

import numpy as np

from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import WLF
from tests.model.closed_form import Cylinder
from tests.model.meshes import quarter
from tests.model.model import Model, skfem

INNER, OUTER = 0.02, 0.05  # m
T, ln_a = 343.15, 0.0  # K
PRESSURE = 2e6  # Pa
LONGEST = 3e5  # s

SHEAR = PronySeries(equilibrium=2e7, moduli=[4e8, 3e8, 2e8], times=[0.02, 1.0, 30.0])
MATERIAL = Material(shear=SHEAR, bulk=PronySeries.elastic(3e9), shift=WLF(C1=14.2, C2=61.0, T_ref=353.15), expansion=6e-5)
SHIFT = 10.0 ** (14.2 * 10.0 / (61.0 - 10.0))  # a_T ten kelvin below T_ref: relaxation is slower by that much


def closed_form(outside):
    shear = PronySeries(equilibrium=SHEAR.equilibrium, moduli=SHEAR.moduli, times=SHEAR.times * SHIFT)
    return Cylinder(inner=INNER, outer=OUTER, outside=outside, shear=shear, K=3e9)


@skfem.LinearForm
def outward(v, w):
    """Work of a pressure of -1 on a side."""
    return w.n[0] * v[0] + w.n[1] * v[1]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Errors:
    """Largest differences from the closed form: displacement of the bore as a part of its own, stress as a part of the pressure."""

    bore: float
    hoop: float
    stress: float


class Quarter:
    """A quarter of the cylinder with its symmetry and its pressure."""

    def __init__(self, routine, outside, across=3, around=3):
        self.basis, self.sides = quarter(INNER, OUTER, across, around)
        held = [self.basis.get_dofs(self.sides["y = 0"]).all("u^2"), self.basis.get_dofs(self.sides["x = 0"]).all("u^1")]
        if outside == "held":
            held.append(self.basis.get_dofs(self.sides["outside"]).all())
        self.model = Model(routine=routine, basis=self.basis, fixed=np.unique(np.concatenate(held)))
        bore = skfem.FacetBasis(self.basis.mesh, self.basis.elem, facets=self.sides["bore"], intorder=5)
        self.load = -PRESSURE * outward.assemble(bore)

    def start(self):
        return self.model.at_rest(T)

    def take(self, state, duration, part):
        """One increment, to `part` of the pressure."""
        return self.model.take(state, duration, T, 0.0, part * self.load)

    def errors(self, state, five):
        """Against Lame's five numbers for unit pressure."""
        alpha, beta, c0, c1, axial = PRESSURE * five
        x = self.basis.doflocs
        dofs = [self.basis.get_dofs(self.sides["bore"]).all(f"u^{i}") for i in (1, 2)]
        expected = alpha * INNER + beta / INNER
        off = [state.displacement[d] - expected * x[i, d] / INNER for i, d in enumerate(dofs)]
        points = self.basis.mapping.F(self.basis.X).reshape(2, -1)
        r2 = (points**2).sum(axis=0)
        cos, sin = points / np.sqrt(r2)
        s11, s22, s33, _, _, s12 = state.stress.T
        s12 = s12 / np.sqrt(2.0)
        hoop = s11 * sin**2 + s22 * cos**2 - 2.0 * s12 * sin * cos - (c0 + c1 / r2)
        radial = s11 * cos**2 + s22 * sin**2 + 2.0 * s12 * sin * cos - (c0 - c1 / r2)
        shear = (s22 - s11) * sin * cos + s12 * (cos**2 - sin**2)
        largest = [np.abs(part).max() / PRESSURE for part in (hoop, radial, shear, s33 - axial)]
        return Errors(
            bore=float(max(np.abs(part).max() for part in off) / abs(expected)),
            hoop=float(largest[0]),
            stress=float(max(largest)),
        )


def growing(count):
    """Ends of `count` increments from 0 to LONGEST that grow, the last nearly 1e6 times as long as the first if there are many."""
    s = np.arange(1, count + 1) / count
    return LONGEST * np.expm1(np.log(1e6) * s) / np.expm1(np.log(1e6))
