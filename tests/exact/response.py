"""The response of a material to a path in 30 digits, from formulas alone; shares no code with the package."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cached_property

import mpmath as mp

from drivers.path import Path
from matlib.material import Material
from tests.exact.kernels import DIGITS, Kernels
from tests.exact.ramps import Ramp
from tests.exact.relations import STRAIN_DRIVEN, STRESS_DRIVEN, Number, Relation, across, along, clamped, one, shear


class ExactResponse:
    """Strain and stress components of a path at every increment end, for one kind of control.

    Parameters
    ----------
    material : Material
    path : Path
        Even increments; targets and temperatures are taken as the doubles that they are.
    """

    def __init__(self, material: Material, path: Path) -> None:
        self.material, self.path = material, path
        self.kernels = Kernels(material.shear, material.bulk)

    @cached_property
    def elastic(self) -> dict[tuple[str, int], list[tuple[int, Relation]]]:
        """By component: which input (0 to 5 the driven components, 6 thermal strain) acts by which relation."""
        mode, masks = self.path.mode, self.path.segments[0].stress_controlled
        if mode.name == "components":
            table: dict[tuple[str, int], list[tuple[int, Relation]]] = {("strain", c): [(c, one)] for c in range(6)}
            for c in range(3):
                table["stress", c] = [(d, along if c == d else across) for d in range(3)] + [(6, clamped)]
                table["stress", c + 3] = [(c + 3, shear)]
            return table
        driven = mode.driven[0]
        relations = (STRESS_DRIVEN if masks[driven] else STRAIN_DRIVEN)[mode.name]
        return {key: [(driven, own), (6, thermal)] for key, (own, thermal) in relations.items()}

    def rows(self) -> list[dict[tuple[str, int], Number]]:
        """Every component that is not zero, a row an increment end, the start left out."""
        with mp.workdps(DIGITS):
            return self._rows()

    def _rows(self) -> list[dict[tuple[str, int], Number]]:
        kernels = [self.kernels.of(relation) for terms in self.elastic.values() for _, relation in terms]
        times = sorted({t for _, _, pairs in kernels for _, t in pairs})
        flows = any(slope for _, slope, _ in kernels)
        place = {t: i for i, t in enumerate(times)}
        law, alpha, T_0 = self.material.shift, mp.mpf(self.material.expansion), mp.mpf(self.path.start_temperature)
        v = [[mp.mpf(0)] * len(times) for _ in range(7)]
        q, u, T = [mp.mpf(0)] * 7, [mp.mpf(0)] * 7, T_0
        rows = []
        for duration, T_end, u_end in self._stretches(u, T, T_0, alpha):
            ramp = Ramp(law, duration, T, T_end, times, flows=flows)
            for i in range(7):
                du = u_end[i] - u[i]
                q[i] += ramp.dxi * u[i] + ramp.lag * du
                v[i] = [d * a + g * du for d, a, g in zip(ramp.decay, v[i], ramp.gain, strict=True)]
            u, T = u_end, T_end
            rows.append({key: mp.mpf(0) for key in self.elastic})
            for key, terms in self.elastic.items():
                for i, relation in terms:
                    constant, slope, pairs = self.kernels.of(relation)
                    rows[-1][key] += constant * u[i] + slope * q[i] + mp.fsum(a * v[i][place[t]] for a, t in pairs)
        return rows

    def _stretches(
        self, u: list[Number], T: Number, T_0: Number, alpha: Number
    ) -> Iterator[tuple[Number, Number, list[Number]]]:
        """Duration of each increment, temperature and inputs at its end."""
        for _, _, segment in self.path.unrolled():
            assert segment.spacing == "even"
            ends = [T] * segment.durations.size if segment.temperatures is None else segment.temperatures.tolist()
            for duration, T_end, target in zip(segment.durations.tolist(), ends, segment.targets.tolist(), strict=True):
                named = [
                    mp.mpf(x) * (1 if c < 3 else 1 / mp.sqrt(2) if stress else mp.sqrt(2))
                    for c, (x, stress) in enumerate(zip(target, segment.stress_controlled.tolist(), strict=True))
                ]
                aims = [
                    u[c] if held else x for c, (x, held) in enumerate(zip(named, segment.held.tolist(), strict=True))
                ]
                count = segment.increments if duration > 0 else 1
                start, T_start, T_end = u, T, mp.mpf(T_end)
                for k in range(1, count + 1):
                    part = mp.mpf(k) / count
                    T = T_start + part * (T_end - T_start)
                    u = [a + part * (b - a) for a, b in zip(start, aims, strict=False)] + [alpha * (T - T_0)]
                    yield mp.mpf(duration) / count, T, u
