"""Elastic relations of every loading mode, in shear and bulk modulus: the text books' table, which Carson transforms obey too."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import mpmath as mp

Number = mp.mpf
Relation = Callable[[Number, Number], Number]

# By mode, by quantity and component (11 22 33 23 13 12): the answer to the driven strain or stress, and to the thermal strain.
Elastic = dict[tuple[str, int], tuple[Relation, Relation]]


def _zero(G: Number, K: Number) -> Number:
    return mp.mpf(0)


def one(G: Number, K: Number) -> Number:
    return mp.mpf(1)


def _young(G: Number, K: Number) -> Number:
    return 9 * K * G / (3 * K + G)


def _nu(G: Number, K: Number) -> Number:
    return (3 * K - 2 * G) / (2 * (3 * K + G))


@cache
def _minus(relation: Relation) -> Relation:
    return lambda G, K: -relation(G, K)


def _one_plus_nu(G: Number, K: Number) -> Number:
    return 9 * K / (2 * (3 * K + G))


def _biaxial(G: Number, K: Number) -> Number:
    """E/(1 - nu)."""
    return 18 * K * G / (3 * K + 4 * G)


def _confined(G: Number, K: Number) -> Number:
    """nu/(1 - nu)."""
    return (3 * K - 2 * G) / (3 * K + 4 * G)


def _swelling(G: Number, K: Number) -> Number:
    """(1 + nu)/(1 - nu)."""
    return 9 * K / (3 * K + 4 * G)


def clamped(G: Number, K: Number) -> Number:
    return -3 * K


def along(G: Number, K: Number) -> Number:
    return K + 4 * G / 3


def across(G: Number, K: Number) -> Number:
    return K - 2 * G / 3


def shear(G: Number, K: Number) -> Number:
    return G


def _volume(G: Number, K: Number) -> Number:
    return 3 * K


def _volume_compliance(G: Number, K: Number) -> Number:
    return 1 / (3 * K)


def _lateral_compliance(G: Number, K: Number) -> Number:
    """-nu/E."""
    return (2 * G - 3 * K) / (18 * K * G)


def _biaxial_compliance(G: Number, K: Number) -> Number:
    """(1 - nu)/E."""
    return (3 * K + 4 * G) / (18 * K * G)


_ONE_TO_ONE = (one, _zero)
STRAIN_DRIVEN: dict[str, Elastic] = {
    "uniaxial stress": {
        ("strain", 0): _ONE_TO_ONE,
        ("strain", 1): (_minus(_nu), _one_plus_nu),
        ("strain", 2): (_minus(_nu), _one_plus_nu),
        ("stress", 0): (_young, _minus(_young)),
    },
    "uniaxial strain": {
        ("strain", 0): _ONE_TO_ONE,
        ("stress", 0): (along, clamped),
        ("stress", 1): (across, clamped),
        ("stress", 2): (across, clamped),
    },
    "equibiaxial stress": {
        ("strain", 0): _ONE_TO_ONE,
        ("strain", 1): _ONE_TO_ONE,
        ("strain", 2): (lambda G, K: -2 * _confined(G, K), _swelling),
        ("stress", 0): (_biaxial, _minus(_biaxial)),
        ("stress", 1): (_biaxial, _minus(_biaxial)),
    },
    "plane strain tension": {
        ("strain", 0): _ONE_TO_ONE,
        ("strain", 2): (_minus(_confined), _swelling),
        ("stress", 0): (lambda G, K: 4 * G * (3 * K + G) / (3 * K + 4 * G), _minus(_biaxial)),
        ("stress", 1): (lambda G, K: 2 * G * _confined(G, K), _minus(_biaxial)),
    },
    "simple shear": {
        ("strain", 5): _ONE_TO_ONE,
        ("stress", 5): (shear, _zero),
        **{("stress", c): (_zero, clamped) for c in range(3)},
    },
    "hydrostatic": {
        **{("strain", c): _ONE_TO_ONE for c in range(3)},
        **{("stress", c): (_volume, clamped) for c in range(3)},
    },
}
STRESS_DRIVEN: dict[str, Elastic] = {
    "uniaxial stress": {
        ("stress", 0): _ONE_TO_ONE,
        ("strain", 0): (lambda G, K: (3 * K + G) / (9 * K * G), one),
        ("strain", 1): (_lateral_compliance, one),
        ("strain", 2): (_lateral_compliance, one),
    },
    "uniaxial strain": {
        ("stress", 0): _ONE_TO_ONE,
        ("stress", 1): (_confined, _minus(_biaxial)),
        ("stress", 2): (_confined, _minus(_biaxial)),
        ("strain", 0): (lambda G, K: 3 / (3 * K + 4 * G), _swelling),
    },
    "equibiaxial stress": {
        ("stress", 0): _ONE_TO_ONE,
        ("stress", 1): _ONE_TO_ONE,
        ("strain", 0): (_biaxial_compliance, one),
        ("strain", 1): (_biaxial_compliance, one),
        ("strain", 2): (lambda G, K: (2 * G - 3 * K) / (9 * K * G), one),
    },
    "plane strain tension": {
        ("stress", 0): _ONE_TO_ONE,
        ("stress", 1): (_nu, _minus(_young)),
        ("strain", 0): (lambda G, K: (3 * K + 4 * G) / (4 * G * (3 * K + G)), _one_plus_nu),
        ("strain", 2): (lambda G, K: (2 * G - 3 * K) / (4 * G * (3 * K + G)), _one_plus_nu),
    },
    "simple shear": {
        ("stress", 5): _ONE_TO_ONE,
        ("strain", 5): (lambda G, K: 1 / G, _zero),
        **{("stress", c): (_zero, clamped) for c in range(3)},
    },
    "hydrostatic": {
        **{("stress", c): _ONE_TO_ONE for c in range(3)},
        **{("strain", c): (_volume_compliance, one) for c in range(3)},
    },
}
