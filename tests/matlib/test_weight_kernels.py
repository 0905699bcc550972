"""Decay and gain of the compiled forms against arbitrary precision, at every size of r."""

import mpmath
import numpy as np
import pytest

from matlib.packing import AWAY_FROM_0, SMALLEST, TILE, pack
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.weight_kernels import A0, A1, A2, A3, A4, A5, A6, A7, A8, A9, LN2_HIGH, LN2_LOW, weigh

mpmath.mp.dps = 50
ONE = pack(PronySeries(equilibrium=0.0, moduli=[1.0], times=[1.0]))  # r is the reduced time itself
EXACT = {
    "exponential": (lambda r: mpmath.exp(-r), lambda r: -mpmath.expm1(-r) / r if r else mpmath.mpf(1)),
    "midpoint": (lambda r: mpmath.exp(-r), lambda r: mpmath.exp(-r / 2)),
    "trapezoidal": (lambda r: (1 - r / 2) / (1 + r / 2), lambda r: 1 / (1 + r / 2)),
    "backward-euler": (lambda r: 1 / (1 + r), lambda r: 1 / (1 + r)),
}
SIZES = np.concatenate(
    [
        [0.0, 5e-324, 1e-310, np.finfo(float).tiny],
        10.0 ** np.linspace(-300.0, 300.0, 121),
        np.linspace(0.0, 4.0, 161)[1:],  # through the edges of the range of the polynomial
        np.log(2.0) * (np.arange(1.0, 40.0) - 0.5) * (1.0 + np.outer([-1e-15, 0.0, 1e-15], np.ones(39))).ravel()[:39],
        np.linspace(4.0, 707.0, 83),
    ]
)


def weights(name: str, r: np.ndarray, kind: int | None = None) -> tuple[np.ndarray, np.ndarray]:
    """Decay and gain of one term of unit time and modulus."""
    rows = np.zeros((1, r.size * 2 * TILE))
    form = RECURSIONS[name].form
    with np.errstate(over="ignore", under="ignore"):
        weigh(form.kind if kind is None else kind, form.a, form.b, r, r.size, ONE.packed[0], ONE.width, rows)
    table = rows.reshape(r.size, 2 * TILE)
    return table[:, 0], table[:, TILE]


def units_off(found: np.ndarray, exact: list[mpmath.mpf]) -> float:
    """Largest difference in units in the last place of the exact value; of the smallest normal double below it."""
    worst = mpmath.mpf(0)
    for value, true in zip(found.tolist(), exact, strict=True):
        unit = max(float(np.spacing(abs(float(true)))), float(np.spacing(np.finfo(float).tiny)))
        worst = max(worst, abs(mpmath.mpf(value) - true) / mpmath.mpf(unit))
    return float(worst)


@pytest.mark.parametrize("name", RECURSIONS)
def test_decay_and_gain_are_right_to_4_units_in_the_last_place_from_nothing_to_1e300(name):
    decay, gain = weights(name, SIZES)
    exact_decay, exact_gain = EXACT[name]
    sizes = [mpmath.mpf(r) for r in SIZES.tolist()]
    # r beyond 708 is where a decay or a half decay is no normal double any more: see the next test
    assert units_off(decay, [exact_decay(r) for r in sizes]) <= 4.0 or name in ("exponential", "midpoint")
    normal = [k for k, r in enumerate(SIZES) if r < 707.0]
    assert units_off(decay[normal], [exact_decay(sizes[k]) for k in normal]) <= 4.0
    normal = [k for k, r in enumerate(SIZES) if r < 707.0 or name != "midpoint"]
    assert units_off(gain[normal], [exact_gain(sizes[k]) for k in normal]) <= 4.0


def test_away_from_0_fewer_steps_do_as_well():
    sizes = SIZES[SIZES >= SMALLEST]
    decay, gain = weights("exponential", sizes, AWAY_FROM_0)
    exact_decay, exact_gain = EXACT["exponential"]
    exact = [mpmath.mpf(r) for r in sizes.tolist()]
    normal = [k for k, r in enumerate(sizes) if r < 707.0]
    assert units_off(decay[normal], [exact_decay(exact[k]) for k in normal]) <= 4.0
    assert units_off(gain, [exact_gain(r) for r in exact]) <= 4.0
    decay, _ = weights("exponential", np.array([0.0]), AWAY_FROM_0)
    assert decay.tolist() == [1.0]


@pytest.mark.parametrize("name", ["exponential", "midpoint"])
def test_a_decay_too_small_for_a_normal_double_is_none_or_within_one_of_it(name):
    r = np.concatenate([np.linspace(707.0, 760.0, 107), [1e3, 1e30, 1e300]])
    decay, _ = weights(name, r)
    with np.errstate(under="ignore"):
        np.testing.assert_allclose(decay, np.exp(-r), rtol=1e-12, atol=2.3e-308)  # the smallest normal double
    assert np.all(decay[r > 760.0] == 0.0)


@pytest.mark.parametrize("name", RECURSIONS)
def test_nothing_happens_in_an_increment_of_nothing(name):
    decay, gain = weights(name, np.array([0.0, 5e-324, 1e-17]))
    assert decay.tolist() == gain.tolist() == [1.0, 1.0, 1.0]


@pytest.mark.parametrize("name", RECURSIONS)
def test_compiled_forms_are_the_functions_of_the_recursion(name):
    recursion = RECURSIONS[name]
    r = 10.0 ** np.linspace(-20.0, 2.5, 200)
    decay, gain = weights(name, r)
    # what is rounded is of size 1, or exp(-r), whose exponent is rounded: r units in the last place
    np.testing.assert_allclose(decay, recursion.decay(r), rtol=2e-13, atol=1e-15)
    np.testing.assert_allclose(gain, recursion.gain(r), rtol=2e-13)


def test_the_polynomial_is_expm1_over_its_argument():
    def polynomial(f):
        total = mpmath.mpf(0)
        for a in (A9, A8, A7, A6, A5, A4, A3, A2, A1, A0):
            total = (total + mpmath.mpf(a)) * f
        return 1 + total

    worst = max(
        abs(polynomial(f) / (mpmath.expm1(f) / f) - 1)
        for f in (mpmath.log(2) / 2 * mpmath.mpf(k) / 200 for k in range(-200, 201) if k)
    )
    assert worst < 3e-17  # an eighth of the rounding of 1


def test_the_two_parts_of_ln_2_are_exact_where_they_must_be():
    assert abs(mpmath.mpf(LN2_HIGH) + mpmath.mpf(LN2_LOW) - mpmath.log(2)) < mpmath.mpf(2) ** -97
    for k in (1, 3, 1021, 1023):
        assert mpmath.mpf(LN2_HIGH * k) == mpmath.mpf(LN2_HIGH) * k


def test_relaxation_times_and_moduli_of_every_size_are_kept():
    series = PronySeries(equilibrium=0.0, moduli=[1e-3, 2.0, 1e12], times=[1e-12, 1.0, 1e20])
    terms = pack(series)
    rows = np.zeros((1, 2 * TILE))
    form = RECURSIONS["exponential"].form
    weigh(form.kind, form.a, form.b, np.array([0.5]), 1, terms.packed[0], terms.width, rows)
    with np.errstate(under="ignore"):
        r = 0.5 / series.times
        np.testing.assert_allclose(rows[0, :3], np.exp(-r), rtol=1e-15)
        np.testing.assert_allclose(rows[0, TILE : TILE + 3], -np.expm1(-r) / r * series.moduli, rtol=1e-15)
    assert rows[0, 3] == 1.0  # what fills the row up relaxes nothing ...
    assert rows[0, TILE + 3] == 0.0  # ... and has no modulus
