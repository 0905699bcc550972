"""The shift laws once more, from the formulas of the text books and the laws' own constants."""

from __future__ import annotations

import itertools
from collections.abc import Callable

import mpmath as mp

from matlib.shift import VFT, WLF, Arrhenius, Crossover, MeasuredRange, NoShift, Polynomial, ShiftLaw, Table
from tests.exact.relations import Number

_WLF = WLF(C1=14.2, C2=61.0, T_ref=353.15)
LAWS = {
    "none": NoShift(T_ref=353.15),
    "wlf": _WLF,
    "vft": VFT(B=1900.0, T_inf=280.0, T_ref=353.15),
    "arrhenius": Arrhenius(activation_energy=1.5e5, T_ref=330.0),
    "polynomial": Polynomial(coefficients=[-0.11, 6e-4, -1.5e-6], T_ref=353.15),
    "polynomial that turns": Polynomial(coefficients=[-0.1, 1e-3], T_ref=310.0),
    "table": Table(T=[310.0, 325.0, 350.0, 361.0, 380.0], log10_a=[5.0, 3.9, 0.0, -0.4, -3.0], T_ref=350.0),
    "crossover": Crossover(below=Arrhenius(activation_energy=2e5, T_ref=340.0), above=_WLF, at=345.0),
    "held outside": MeasuredRange(law=_WLF, low=330.0, high=370.0, outside="hold"),
}
"""One law of each kind, and what is special about some; all of them answer from 293 K to 420 K."""


def exact_ln_shift(law: ShiftLaw) -> Callable[[Number], Number]:
    """ln a_T of a law from its own constants."""
    T_ref = mp.mpf(law.T_ref)
    match law:
        case NoShift():
            return lambda T: mp.mpf(0)
        case WLF():
            C1, C2 = mp.mpf(law.C1) * (1 if law.base == "e" else mp.log(10)), mp.mpf(law.C2)
            return lambda T: -C1 * (T - T_ref) / (C2 + T - T_ref)
        case VFT():
            B, T_inf = mp.mpf(law.B), mp.mpf(law.T_inf)
            return lambda T: B / (T - T_inf) - B / (T_ref - T_inf)
        case Arrhenius():
            B = mp.mpf(law.activation_energy) / mp.mpf(law.gas_constant)
            return lambda T: B / T - B / T_ref
        case Polynomial():
            c = [mp.log(10) * mp.mpf(value) for value in law.coefficients.tolist()]
            return lambda T: mp.fsum(a * (T - T_ref) ** k for k, a in enumerate(c, start=1))
        case Table():
            return _table(law)
        case Crossover():
            below, above, at = exact_ln_shift(law.below), exact_ln_shift(law.above), mp.mpf(law.at)
            step = above(at) - below(at)
            zero = above(T_ref) if T_ref >= at else below(T_ref) + step
            return lambda T: (above(T) if T >= at else below(T) + step) - zero
        case MeasuredRange():
            inner, low, high = exact_ln_shift(law.law), mp.mpf(law.low), mp.mpf(law.high)
            return (lambda T: inner(min(max(T, low), high))) if law.outside == "hold" else inner
    raise AssertionError(law)


def _table(law: Table) -> Callable[[Number], Number]:
    """Monotone cubics of Fritsch and Carlson, with the four basis functions written out."""
    x, y = [mp.mpf(v) for v in law.T.tolist()], [mp.log(10) * mp.mpf(v) for v in law.log10_a.tolist()]
    n = len(x)
    h = [b - a for a, b in itertools.pairwise(x)]
    s = [(y[i + 1] - y[i]) / h[i] for i in range(n - 1)]
    d = [mp.mpf(0)] * n
    for i in range(1, n - 1):
        if s[i - 1] * s[i] > 0:
            d[i] = (h[i] * s[i - 1] + h[i - 1] * s[i]) / (h[i] + h[i - 1])
    if n == 2:
        d = [s[0], s[0]]
    else:
        for end, own, other, near, far in ((0, s[0], s[1], h[0], h[1]), (n - 1, s[-1], s[-2], h[-1], h[-2])):
            parabola = own + (own - other) * near / (near + far)
            d[end] = parabola if parabola * own > 0 else own
    scale = [mp.mpf(1)] * n
    for i in range(n - 1):
        if s[i] == 0:
            scale[i] = scale[i + 1] = mp.mpf(0)
        elif (radius := mp.hypot(d[i] / s[i], d[i + 1] / s[i])) > 3:
            scale[i], scale[i + 1] = min(scale[i], 3 / radius), min(scale[i + 1], 3 / radius)
    d = [a * b for a, b in zip(d, scale, strict=True)]

    def ln_shift(T: Number) -> Number:
        if x[0] >= T:
            return y[0] + d[0] * (T - x[0])
        if x[-1] <= T:
            return y[-1] + d[-1] * (T - x[-1])
        i = max(k for k in range(n - 1) if x[k] <= T)
        t = (T - x[i]) / h[i]
        u = 1 - t
        return y[i] * (1 + 2 * t) * u**2 + h[i] * t * u * (d[i] * u - d[i + 1] * t) + y[i + 1] * t**2 * (3 - 2 * t)

    return ln_shift
