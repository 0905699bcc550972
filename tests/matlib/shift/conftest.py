"""One law of each kind, and its formula in arbitrary precision."""

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
from tests.exact.laws import exact_ln_shift

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


@pytest.fixture
def exact() -> Callable[[ShiftLaw, float], mp.mpf]:
    """ln a_T from the formula in the text books, in 30 digits, from the law's own constants."""
    with mp.workdps(30):
        yield lambda law, T: exact_ln_shift(law)(mp.mpf(T))


@pytest.fixture
def exact_mean_rate() -> Callable[[ShiftLaw, float, float], mp.mpf]:
    """Mean of 1/a_T over a ramp by mpmath's quadrature, split at the kinks and in eight."""

    def mean(law: ShiftLaw, T_start: float, T_end: float) -> mp.mpf:
        low, high = sorted((mp.mpf(T_start), mp.mpf(T_end)))
        kinks = [mp.mpf(T) for T in law.knots if low < T < high]
        cuts = sorted([*kinks, *(low + (high - low) * k / 8 for k in range(9))])
        ln_shift = exact_ln_shift(law)
        return mp.quad(lambda T: mp.exp(-ln_shift(T)), cuts) / (high - low)

    with mp.workdps(30):
        yield mean
