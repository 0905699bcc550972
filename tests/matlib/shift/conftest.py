"""One law of each kind, and the same formulas written once more in arbitrary precision."""

from __future__ import annotations

from collections.abc import Callable

import mpmath as mp
import pytest

from matlib.shift import (
    VFT,
    WLF,
    Arrhenius,
    Crossover,
    MeasuredRange,
    NoShift,
    Polynomial,
    ShiftLaw,
    Table,
)

_WLF = WLF(C1=14.2, C2=61.0, T_ref=353.15)
LAWS: dict[str, ShiftLaw] = {
    "none": NoShift(T_ref=350.0),
    "wlf": _WLF,
    "wlf base e": WLF(C1=30.0, C2=55.0, T_ref=353.15, base="e"),
    "vft": VFT(B=1900.0, T_inf=290.0, T_ref=353.15),
    "vft, pole below 0 K": VFT(B=30000.0, T_inf=-150.0, T_ref=353.15),
    "arrhenius": Arrhenius(activation_energy=1.5e5, T_ref=330.0),
    "polynomial": Polynomial(coefficients=[-0.11, 6e-4, -1.5e-6], T_ref=353.15),
    "polynomial that turns": Polynomial(coefficients=[-0.1, 1e-3], T_ref=330.0),
    "table": Table(T=[310.0, 325.0, 350.0, 361.0, 380.0], log10_a=[5.0, 3.9, 0.0, -0.4, -3.0], T_ref=350.0),
    "table with a turning point": Table(T=[310.0, 330.0, 350.0, 370.0], log10_a=[2.0, 3.0, 0.0, 0.0], T_ref=350.0),
    "crossover": Crossover(below=Arrhenius(activation_energy=2e5, T_ref=340.0), above=_WLF, at=345.0),
    "crossover referred below": Crossover(
        below=Arrhenius(activation_energy=2e5, T_ref=340.0), above=_WLF, at=345.0, T_ref=330.0
    ),
    "measured, extrapolate": MeasuredRange(law=_WLF, low=330.0, high=370.0),
    "measured, hold": MeasuredRange(law=_WLF, low=330.0, high=370.0, outside="hold"),
    "measured, refuse": MeasuredRange(law=_WLF, low=301.0, high=460.0, outside="refuse"),
}


@pytest.fixture(params=LAWS.values(), ids=LAWS.keys())
def law(request: pytest.FixtureRequest) -> ShiftLaw:
    """Each law in turn; all of them answer from 302 K to 450 K."""
    return request.param


def _hermite(law: Table, T: mp.mpf) -> mp.mpf:
    """Monotone cubic of Fritsch and Carlson, with the four cubic basis functions written out."""
    x, y = [mp.mpf(v) for v in law.T.tolist()], [mp.mpf(v) for v in law.log10_a.tolist()]
    n = len(x)
    h = [x[i + 1] - x[i] for i in range(n - 1)]
    s = [(y[i + 1] - y[i]) / h[i] for i in range(n - 1)]
    d = [mp.mpf(0)] * n
    for i in range(1, n - 1):
        if s[i - 1] * s[i] > 0:
            d[i] = (h[i] * s[i - 1] + h[i - 1] * s[i]) / (h[i] + h[i - 1])
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
    if x[0] >= T:
        return y[0] + d[0] * (T - x[0])
    if x[-1] <= T:
        return y[-1] + d[-1] * (T - x[-1])
    i = max(k for k in range(n - 1) if x[k] <= T)
    t = (T - x[i]) / h[i]
    return (
        y[i] * (1 + 2 * t) * (1 - t) ** 2
        + h[i] * d[i] * t * (1 - t) ** 2
        + y[i + 1] * t**2 * (3 - 2 * t)
        + h[i] * d[i + 1] * t**2 * (t - 1)
    )


def ln_shift_exactly(law: ShiftLaw, T: float | mp.mpf) -> mp.mpf:
    """ln a_T from the formula in the text books, in 30 digits, from the law's own constants."""
    T = mp.mpf(T)
    match law:
        case NoShift():
            return mp.mpf(0)
        case WLF():
            x, C1, C2 = T - mp.mpf(law.T_ref), mp.mpf(law.C1), mp.mpf(law.C2)
            return -C1 * x / (C2 + x) * (1 if law.base == "e" else mp.log(10))
        case VFT():
            return law.B / (T - mp.mpf(law.T_inf)) - law.B / (mp.mpf(law.T_ref) - mp.mpf(law.T_inf))
        case Arrhenius():
            return mp.mpf(law.activation_energy) / mp.mpf(law.gas_constant) * (1 / T - 1 / mp.mpf(law.T_ref))
        case Polynomial():
            x = T - mp.mpf(law.T_ref)
            return mp.log(10) * sum(mp.mpf(float(c)) * x**k for k, c in enumerate(law.coefficients, start=1))
        case Table():
            return mp.log(10) * _hermite(law, T)
        case Crossover():

            def joined(T: float | mp.mpf) -> mp.mpf:
                if law.at <= T:
                    return ln_shift_exactly(law.above, T)
                step = ln_shift_exactly(law.above, law.at) - ln_shift_exactly(law.below, law.at)
                return ln_shift_exactly(law.below, T) + step

            return joined(T) - joined(law.T_ref)
        case MeasuredRange():
            inside = min(max(T, mp.mpf(law.low)), mp.mpf(law.high))
            return ln_shift_exactly(law.law, inside if law.outside == "hold" else T)
    raise AssertionError(law)


@pytest.fixture
def exact() -> Callable[[ShiftLaw, float], mp.mpf]:
    """`ln_shift_exactly`, in 30 digits."""
    with mp.workdps(30):
        yield ln_shift_exactly


@pytest.fixture
def exact_mean_rate() -> Callable[[ShiftLaw, float, float], mp.mpf]:
    """Mean of 1/a_T over a ramp by mpmath's quadrature, split at the kinks and in eight."""

    def mean(law: ShiftLaw, T_start: float, T_end: float) -> mp.mpf:
        low, high = sorted((mp.mpf(T_start), mp.mpf(T_end)))
        kinks = [mp.mpf(T) for T in law.knots if low < T < high]
        cuts = sorted([*kinks, *(low + (high - low) * k / 8 for k in range(9))])
        return mp.quad(lambda T: mp.exp(-ln_shift_exactly(law, T)), cuts) / (high - low)

    with mp.workdps(30):
        yield mean
