"""The hereditary integral of one exponential over a ramp of temperature, in 30 digits.

The rate at Gauss nodes, integrated as the polynomial through them, is the reduced time there (nested quadrature); panels are
halved until halving one changes nothing.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from functools import cache

import mpmath as mp

from matlib.shift import ShiftLaw
from tests.exact.kernels import DIGITS
from tests.exact.laws import exact_ln_shift
from tests.exact.relations import Number

NODES = 14
TOLERANCE = mp.mpf(10) ** -17  # of a unit change over the whole ramp
FORGOTTEN = 42  # exp(-42) = 6e-19


@cache
def _gauss(n: int) -> tuple[list[Number], list[Number], list[list[Number]]]:
    """Nodes and weights on [0, 1], and the integral of the polynomial through the nodes from 0 to each of them."""
    with mp.workdps(2 * DIGITS):

        def legendre(x: Number) -> list[Number]:
            P = [mp.mpf(1), x]
            for k in range(1, n):
                P.append(((2 * k + 1) * x * P[k] - k * P[k - 1]) / (k + 1))
            return P

        def slope(x: Number) -> Number:
            P = legendre(x)
            return n * (P[n - 1] - x * P[n]) / (1 - x * x)

        nodes = [-mp.cos(mp.pi * (i + mp.mpf(3) / 4) / (n + mp.mpf(1) / 2)) for i in range(n)]
        for _ in range(7):  # Newton: from three digits, doubled each time
            nodes = [x - legendre(x)[n] / slope(x) for x in nodes]
        weights = [2 / ((1 - x * x) * slope(x) ** 2) for x in nodes]
        values = [legendre(x) for x in nodes]
        upto = [
            [x + 1, *((P[k + 1] - P[k - 1]) / (2 * k + 1) for k in range(1, n))]
            for x, P in zip(nodes, values, strict=True)
        ]
        matrix = [
            [w * mp.fsum((2 * k + 1) * values[j][k] * row[k] for k in range(n)) / 4 for j, w in enumerate(weights)]
            for row in upto
        ]
        return [(1 + x) / 2 for x in nodes], [w / 2 for w in weights], matrix


class _Panel:
    """A part [a, b] of a ramp: its reduced time, the decayed integrals of all times that matter, and the lag."""

    def __init__(self, ramp: Ramp, a: Number, b: Number, after: Number) -> None:
        nodes, weights, matrix = _gauss(NODES)
        self.a, self.b = a, b
        h = b - a
        rate = [ramp.rate(a + h * x) for x in nodes]
        length = h * ramp.duration
        self.dxi = length * mp.fdot(weights, rate)
        rest = [self.dxi - length * mp.fdot(row, rate) for row in matrix]
        self.active = [i for i, t in enumerate(ramp.times) if after < FORGOTTEN * t]
        self.gain = {
            i: h * mp.fdot(weights, [mp.exp(-x / ramp.times[i]) for x in rest])
            if self.dxi > TOLERANCE * ramp.times[i] * 1e-9
            else h
            for i in self.active
        }
        self.lag = h * mp.fdot(weights, rest)


class Ramp:
    """One stretch of straight temperature: decay and gain of each time, reduced time and lag."""

    def __init__(
        self, law: ShiftLaw, duration: Number, T_start: Number, T_end: Number, times: list[Number], *, flows: bool
    ) -> None:
        ln_shift = exact_ln_shift(law)
        self.duration, self.times, self.flows = duration, times, flows
        self.rate: Callable[[Number], Number] = lambda x: mp.exp(-ln_shift(T_start + (T_end - T_start) * x))
        self.dxi, self.lag, self.gain = mp.mpf(0), mp.mpf(0), [mp.mpf(0)] * len(times)
        if T_start == T_end or duration == 0:
            self._isothermal()
        else:
            cuts = sorted(x for T in law.knots if 0 < (x := (mp.mpf(T) - T_start) / (T_end - T_start)) < 1)
            edges = [mp.mpf(0), *cuts, mp.mpf(1)]
            for a, b in reversed(list(itertools.pairwise(edges))):
                self._add(_Panel(self, a, b, self.dxi))
        self.decay = [mp.exp(-self.dxi / t) for t in times]

    def _isothermal(self) -> None:
        self.dxi = self.duration * self.rate(mp.mpf(0))
        self.lag = self.dxi / 2
        self.gain = [-mp.expm1(-self.dxi / t) * t / self.dxi if self.dxi else mp.mpf(1) for t in self.times]

    def _add(self, whole: _Panel) -> None:
        """Add a panel in front of what there is, halved as often as it takes, the later half first."""
        if not whole.active and not self.flows:
            return  # long forgotten at the end of the ramp, and so is what the panel's own length says
        middle = (whole.a + whole.b) / 2
        right = _Panel(self, middle, whole.b, self.dxi)
        left = _Panel(self, whole.a, middle, self.dxi + right.dxi)
        if self._agrees(whole, left, right):
            for panel in (right, left):
                for i in panel.active:
                    self.gain[i] += mp.exp(-self.dxi / self.times[i]) * panel.gain[i]
                self.lag += panel.lag + (panel.b - panel.a) * self.dxi
                self.dxi += panel.dxi
        else:
            self._add(right)
            self._add(left)

    def _agrees(self, whole: _Panel, left: _Panel, right: _Panel) -> bool:
        clock = abs(whole.dxi - left.dxi - right.dxi)
        if self.flows and clock > TOLERANCE * (self.dxi + whole.dxi):
            return False
        for i in whole.active:
            t = self.times[i]
            if whole.dxi > 30 * t and whole.b - whole.a > TOLERANCE:
                return False  # a layer at the end may hide between the nodes
            weight = mp.exp(-self.dxi / t)
            halves = right.gain[i] + mp.exp(-right.dxi / t) * left.gain.get(i, mp.mpf(0))
            if weight * max(abs(whole.gain[i] - halves), clock / t) > TOLERANCE:
                return False
        return True
