"""Two models of a thick-walled cylinder, a quarter of its section and its radius, and how far they are from the closed form."""

from dataclasses import dataclass

import numpy as np

from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import WLF
from tests.model.closed_form import Cylinder
from tests.model.meshes import quarter, radius
from tests.model.model import Model, skfem

INNER, OUTER = 0.02, 0.035  # m
PRESSURE = 2e6  # Pa
T = 343.15  # K
LONGEST = 2e4  # s
GROWTH = 30.0  # how many times longer increments get, in the limit of many

SHEAR = PronySeries(equilibrium=1e8, moduli=[4e8, 3e8, 2e8], times=[1.0, 5.0, 30.0])
BULK = PronySeries.elastic(1.5e9)
MATERIAL = Material(shear=SHEAR, bulk=BULK, shift=WLF(C1=14.2, C2=61.0, T_ref=T + 10.0), expansion=6e-5)
SHIFT = 10.0 ** (14.2 * 10.0 / (61.0 - 10.0))  # a_T ten kelvin below T_ref: relaxation is slower by that much


def closed_form(outside):
    """What the cylinder should do; its outside is "free" or "held"."""
    shear = PronySeries(equilibrium=SHEAR.equilibrium, moduli=SHEAR.moduli, times=SHEAR.times * SHIFT)
    return Cylinder(inner=INNER, outer=OUTER, outside=outside, shear=shear, K=BULK.equilibrium)


def ends(count):
    """Ends of `count` increments from 0 to LONGEST that grow [s]."""
    return LONGEST * np.expm1(np.log(GROWTH) * np.arange(1, count + 1) / count) / (GROWTH - 1.0)


@skfem.LinearForm
def against(v, w):
    """Work of a tension of one on a side."""
    return w.n[0] * v[0] + w.n[1] * v[1]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Errors:
    """Largest differences from the closed form: displacement of the bore as a part of its own, stresses as a part of the pressure."""

    bore: float
    hoop: float
    stress: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Ring:
    """A model, the load of the whole pressure, and the degrees of freedom of the bore: one array a direction."""

    model: Model
    load: np.ndarray
    bore: tuple[np.ndarray, ...]

    def start(self):
        return self.model.at_rest(T)

    def take(self, state, duration, part=1.0):
        """One increment, to `part` of the pressure at its end."""
        return self.model.take(state, duration, T, 0.0, part * self.load)

    def polar(self, state):
        """Stress at every point: its radius, then radial, hoop, axial and shear stress."""
        points = np.asarray(self.model.basis.global_coordinates()).reshape(len(self.bore), -1)
        r = np.sqrt((points**2).sum(axis=0))
        cos, sin = points / r if len(points) == 2 else (1.0, 0.0)
        s11, s22, s33, _, _, s12 = state.stress.T
        s12 = s12 / np.sqrt(2.0)
        radial = s11 * cos**2 + s22 * sin**2 + 2.0 * s12 * sin * cos
        hoop = s11 * sin**2 + s22 * cos**2 - 2.0 * s12 * sin * cos
        return r, radial, hoop, s33, (s22 - s11) * sin * cos + s12 * (cos**2 - sin**2)

    def errors(self, state, five):
        """Against Lame's five numbers for unit pressure."""
        alpha, beta, c0, c1, axial = PRESSURE * five
        expected = alpha * INNER + beta / INNER
        moved = np.array([state.displacement[d] for d in self.bore])
        outward = np.array([self.model.basis.doflocs[i, d] for i, d in enumerate(self.bore)]) / INNER
        r, radial, hoop, s33, shear = self.polar(state)
        off = [hoop - (c0 + c1 / r**2), radial - (c0 - c1 / r**2), s33 - axial, shear]
        largest = [float(np.abs(stress).max() / PRESSURE) for stress in off]
        bore = float(np.abs(moved - expected * outward).max() / abs(expected))
        return Errors(bore=bore, hoop=largest[0], stress=max(largest))


def quarter_ring(routine, outside, across=3, around=3):
    """A quarter of the section, with its symmetry."""
    basis, sides = quarter(INNER, OUTER, across, around)
    fixed = [basis.get_dofs(sides["y = 0"]).all("u^2"), basis.get_dofs(sides["x = 0"]).all("u^1")]
    if outside == "held":
        fixed.append(basis.get_dofs(sides["outside"]).all())
    bore = basis.get_dofs(sides["bore"])
    facets = skfem.FacetBasis(basis.mesh, basis.elem, facets=sides["bore"], intorder=5)
    return Ring(
        model=Model(routine=routine, basis=basis, fixed=np.unique(np.concatenate(fixed))),
        load=-PRESSURE * against.assemble(facets),
        bore=(bore.all("u^1"), bore.all("u^2")),
    )


def radial_ring(routine, outside, across=8):
    """The radius alone, by symmetry about the axis."""
    basis, sides = radius(INNER, OUTER, across)
    bore = basis.get_dofs(sides["bore"]).all()
    load = np.zeros(basis.N)
    load[bore] = PRESSURE * INNER
    fixed = basis.get_dofs(sides["outside"]).all() if outside == "held" else np.empty(0, dtype=int)
    return Ring(model=Model(routine=routine, basis=basis, fixed=fixed), load=load, bore=(bore,))
