"""Kernels of any elastic relation in 30 digits: the residues of its Carson transform, each read as a numerical limit."""

from __future__ import annotations

import itertools

import mpmath as mp

from matlib.prony import PronySeries
from tests.exact.relations import Number, Relation

DIGITS = 30


def carson(series: PronySeries, s: Number) -> Number:
    """Carson transform of a relaxation modulus."""
    terms = zip(series.moduli.tolist(), series.times.tolist(), strict=True)
    return mp.mpf(series.equilibrium) + mp.fsum(m * s * t / (1 + s * t) for m, t in terms)


class Kernels:
    """Poles that the kernels of a material may have, and the kernel of any elastic relation."""

    def __init__(self, G: PronySeries, K: PronySeries) -> None:
        self.G, self.K = G, K
        self.found: dict[Relation, tuple[Number, Number, list[tuple[Number, Number]]]] = {}
        with mp.workdps(4 * DIGITS):
            own = sorted({mp.mpf(t) for t in (*G.times.tolist(), *K.times.tolist())})
            sums = ((0, 1), (1, 0), (3, 1), (3, 4))  # every denominator is made of K, G, 3K + G and 3K + 4G
            zeros = [root for bulk, shear in sums for root in self._zeros(bulk, shear)]
            self.times: list[Number] = []
            for x in sorted(
                {*own, *zeros}
            ):  # sums of two moduli of one shape vanish together, but for their last digits
                if not self.times or x - self.times[-1] > mp.mpf(10) ** (-2 * DIGITS) * x:
                    self.times.append(x)

    def _zeros(self, bulk: int, shear: int) -> list[Number]:
        """Times -1/s at which the sum vanishes: one between two relaxation times, one beyond the last of a solid."""
        poles = sorted({mp.mpf(t) for s, w in ((self.K, bulk), (self.G, shear)) if w for t in s.times.tolist()})
        if not poles:
            return []

        terms = [
            (factor * mp.mpf(m) * t, mp.mpf(t))
            for series, factor in ((self.K, bulk), (self.G, shear))
            if factor
            for m, t in zip(series.moduli.tolist(), series.times.tolist(), strict=True)
        ]
        end = bulk * mp.mpf(self.K.equilibrium) + shear * mp.mpf(self.G.equilibrium)

        def f(x: Number) -> Number:
            return end + mp.fsum(u / (t - x) for u, t in terms)

        gaps = list(itertools.pairwise(poles))
        if end > 0:
            gaps.append((poles[-1], poles[-1] + 2 * sum(u for u, _ in terms) / end))
        roots = []
        for low, high in gaps:
            a, b = low, high  # f rises from minus to plus infinity
            for _ in range(3 * DIGITS):
                middle = (a + b) / 2
                a, b = (middle, b) if f(middle) < 0 else (a, middle)
            x = (a + b) / 2
            for _ in range(4):  # Newton: from 27 digits, doubled each time
                x -= f(x) / mp.fsum(u / (t - x) ** 2 for u, t in terms)
            assert a <= x <= b
            roots.append(x)
        return roots

    def of(self, relation: Relation) -> tuple[Number, Number, list[tuple[Number, Number]]]:
        """Constant, slope, and pairs of amplitude and time of the answer to a unit step."""
        if relation not in self.found:
            with mp.workdps(4 * DIGITS):
                self.found[relation] = self._of(relation)
        return self.found[relation]

    def _of(self, relation: Relation) -> tuple[Number, Number, list[tuple[Number, Number]]]:
        near = mp.mpf(10) ** -(DIGITS + 5)  # of the distance to a pole, where the residue is read

        def H(s: Number) -> Number:
            return relation(carson(self.G, s), carson(self.K, s))

        pairs = []
        for x in self.times:
            distance = near * min([abs(1 / x - 1 / y) for y in self.times if y != x] + [1 / x])
            amplitude = distance * H(distance - 1 / x) / (-1 / x)
            if abs(amplitude) > mp.mpf(10) ** -DIGITS * abs(H(mp.mpf(1) / x)):
                pairs.append((amplitude, x))
        late = near / (self.times[-1] if self.times else 1)
        slope = late * H(late) if self._flows(H, late) else mp.mpf(0)
        at_once = relation(*(mp.mpf(s.equilibrium) + mp.fsum(s.moduli.tolist()) for s in (self.G, self.K)))
        return at_once - mp.fsum(amplitude for amplitude, _ in pairs), slope, pairs

    @staticmethod
    def _flows(H: Relation, late: Number) -> bool:
        return abs(H(late)) > 1e3 * abs(H(late * 1e6))
