r"""Compiled whole-path kernels, private to `viscoelastic`: float64 arrays in, preallocated arrays out.

Notation as in `recursion`: `h` are the relaxing deviatoric stresses, `p` the relaxing mean stresses, `theta` the mechanical
volume strain, `e` deviatoric strain increments; ``G2`` and ``K`` are the equilibrium moduli in shear, doubled, and in volume.
Nothing is checked inside; shapes are the caller's duty.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from matlib import packing, term_kernels, weight_kernels
from matlib.arrays import BoolArray, FloatArray
from matlib.compiling import kept, plain, source_stamp
from matlib.packing import AWAY_FROM_0, EXPONENTIAL, GIVEN, SMALLEST, TILE, Form, State, Terms
from matlib.term_kernels import ROW, carry_and_look, carry_mean, carry_pairs, forget, look_mean, stiffness
from matlib.weight_kernels import weigh

__all__ = ["run_members"]

CHUNK = 64
"""Increments, an even number, whose weights are held at a time; they fit the innermost cache."""

THIRD = 1.0 / 3.0
IntArray = NDArray[np.int64]


@plain
def _distinct(given: bool, dxi: FloatArray, first: int, count: int, pairs: IntArray, values: FloatArray) -> int:
    """Collect the reduced times of a chunk pair by pair, runs of equal pairs once; how many times there are.

    ``pairs`` says where each pair is found. An increment of nothing fills up the last.
    """
    found = 0
    for q in range((count + 1) // 2):
        a = first + 2 * q
        one, two = dxi[a], dxi[a + 1] if 2 * q + 1 < count else 0.0
        if given or q == 0 or one != values[found - 2] or two != values[found - 1]:
            values[found], values[found + 1] = one, two
            found += 2
        pairs[q] = found // 2 - 1
    return found


@plain
def _take_given(given: FloatArray, first: int, count: int, weights: FloatArray) -> None:
    """Weights of a chunk as they are handed over; nothing relaxes in what fills up the last pair."""
    for tile in range(weights.shape[0]):
        for a in range(count):
            for i in range(ROW):
                weights[tile, a * ROW + i] = given[first + a, tile, i]
        if count % 2 == 1:
            for i in range(TILE):
                weights[tile, count * ROW + i] = 1.0


@plain
def _row(pairs: IntArray, a: int) -> int:
    """Row of the weights that belongs to increment `a` of the chunk."""
    return 2 * pairs[a // 2] + a % 2


@plain
def _follow_strains(
    first: int,
    count: int,
    targets: FloatArray,
    thermal: FloatArray,
    pairs: IntArray,
    G2: float,
    shear_count: int,
    shear_weights: FloatArray,
    K: float,
    bulk_count: int,
    bulk_weights: FloatArray,
    strain: FloatArray,
    theta: FloatArray,
    h: FloatArray,
    p: FloatArray,
    e: FloatArray,
    stress_out: FloatArray,
) -> None:
    """Take a chunk of increments whose strains are all given: what does not relax first, then the terms in pairs."""
    s0, s1, s2, s3, s4, s5 = strain[0], strain[1], strain[2], strain[3], strain[4], strain[5]
    volume_strain = theta[0]
    for a in range(count):
        k = first + a
        t0, t1, t2 = targets[k, 0], targets[k, 1], targets[k, 2]
        t3, t4, t5 = targets[k, 3], targets[k, 4], targets[k, 5]
        x, y, z = t0 - s0, t1 - s1, t2 - s2
        volume = x + y + z
        volume_strain += volume - thermal[k]
        pressure = K * volume_strain
        if bulk_count > 0:
            pressure += carry_mean(p, bulk_count, bulk_weights, _row(pairs, a), volume - thermal[k])
        mean = THIRD * volume
        e[a, 0], e[a, 1], e[a, 2], e[a, 3], e[a, 4], e[a, 5] = x - mean, y - mean, z - mean, t3 - s3, t4 - s4, t5 - s5
        mean = THIRD * (t0 + t1 + t2)
        stress_out[k, 0] = G2 * (t0 - mean) + pressure
        stress_out[k, 1] = G2 * (t1 - mean) + pressure
        stress_out[k, 2] = G2 * (t2 - mean) + pressure
        stress_out[k, 3], stress_out[k, 4], stress_out[k, 5] = G2 * t3, G2 * t4, G2 * t5
        s0, s1, s2, s3, s4, s5 = t0, t1, t2, t3, t4, t5
    strain[0], strain[1], strain[2], strain[3], strain[4], strain[5] = s0, s1, s2, s3, s4, s5
    theta[0] = volume_strain
    if count % 2 == 1:
        for c in range(6):
            e[count, c] = 0.0
    carry_pairs(h, shear_count, shear_weights, pairs, (count + 1) // 2, e, first, stress_out)


@plain
def _solve(
    targets: FloatArray,
    k: int,
    stress_controlled: BoolArray,
    strain: FloatArray,
    kept: FloatArray,
    mu2: float,
    bulk: float,
    step: FloatArray,
) -> None:
    r"""Strain increment that leads to row `k` of the targets, from the stress `kept` at no increment.

    The stress is affine in it with the isotropic tangent :math:`2 \mu P_{dev} + 3 k P_{vol}`, so that the free components
    have a closed form: with `m` free normal ones and right-hand sides :math:`b`, :math:`S = \sum b / (2\mu + m\lambda)`,
    :math:`x = (b - \lambda S) / 2\mu`, :math:`\lambda = k - 2\mu/3`.
    """
    lam = bulk - mu2 / 3.0
    given, free = 0.0, 0
    for c in range(6):
        step[c] = 0.0 if stress_controlled[c] else targets[k, c] - strain[c]
    for c in range(3):
        given += step[c]
        free += 1 if stress_controlled[c] else 0
    given *= lam
    b_sum = 0.0
    for c in range(3):
        if stress_controlled[c]:
            b_sum += targets[k, c] - kept[c] - given
    S = b_sum / (mu2 + free * lam)
    for c in range(6):
        if stress_controlled[c]:
            step[c] = (targets[k, c] - kept[c] - (given + lam * S if c < 3 else 0.0)) / mu2


@plain
def _follow_mixed(
    first: int,
    count: int,
    targets: FloatArray,
    stress_controlled: BoolArray,
    thermal: FloatArray,
    pairs: IntArray,
    G2: float,
    shear_count: int,
    shear_weights: FloatArray,
    K: float,
    bulk_count: int,
    bulk_weights: FloatArray,
    strain: FloatArray,
    theta: FloatArray,
    h: FloatArray,
    p: FloatArray,
    room: FloatArray,
    strain_out: FloatArray,
    stress_out: FloatArray,
) -> None:
    """Take a chunk of increments some of whose stresses are given: what the next one keeps is summed on the way."""
    step, kept, e = room[0], room[1], room[2]
    row = nothing = 2 * pairs.size  # of an increment of nothing
    e[:] = 0.0
    for a in range(count + 1):
        next_row = _row(pairs, a) if a < count else nothing
        carry_and_look(h, shear_count, shear_weights, row, next_row, e, kept)
        if a == count:
            break
        k, row = first + a, next_row
        mu2 = stiffness(G2, shear_count, shear_weights, row)
        tangent, pressure = K, K * theta[0]
        if bulk_count > 0:
            tangent = stiffness(K, bulk_count, bulk_weights, row)
            pressure += look_mean(p, bulk_count, bulk_weights, row)
        pressure -= tangent * thermal[k]
        mean = THIRD * (strain[0] + strain[1] + strain[2])
        for c in range(3):
            kept[c] += G2 * (strain[c] - mean) + pressure
            kept[c + 3] += G2 * strain[c + 3]
        _solve(targets, k, stress_controlled, strain, kept, mu2, tangent, step)
        volume = step[0] + step[1] + step[2]
        theta[0] += volume - thermal[k]
        if bulk_count > 0:
            carry_mean(p, bulk_count, bulk_weights, row, volume - thermal[k])
        for c in range(6):
            e[c] = step[c] - THIRD * volume if c < 3 else step[c]
            stress_out[k, c] = kept[c] + mu2 * e[c] + (tangent * volume if c < 3 else 0.0)
            strain[c] = strain[c] + step[c] if stress_controlled[c] else targets[k, c]
            strain_out[k, c] = strain[c]


@plain
def _follow_member(
    kind: int,
    A: float,
    B: float,
    dxi: FloatArray,
    targets: FloatArray,
    stress_controlled: BoolArray,
    thermal: FloatArray,
    G2: float,
    shear_terms: FloatArray,
    shear_count: int,
    shear_given: FloatArray,
    K: float,
    bulk_terms: FloatArray,
    bulk_count: int,
    bulk_given: FloatArray,
    strain: FloatArray,
    theta: FloatArray,
    h: FloatArray,
    p: FloatArray,
    strain_out: FloatArray,
    stress_out: FloatArray,
    shear_weights: FloatArray,
    bulk_weights: FloatArray,
    pairs: IntArray,
    values: FloatArray,
    e: FloatArray,
) -> None:
    """Take one member over all increments, chunk by chunk; the last five arrays are room to work in."""
    mixed = stress_controlled.any()
    for first in range(0, dxi.size, CHUNK):
        count = min(CHUNK, dxi.size - first)
        found = _distinct(kind == GIVEN, dxi, first, count, pairs, values)
        if kind == GIVEN:
            _take_given(shear_given, first, count, shear_weights)
            _take_given(bulk_given, first, count, bulk_weights)
        else:
            weigh(kind, A, B, values, found, shear_terms, shear_count, shear_weights)
            weigh(kind, A, B, values, found, bulk_terms, bulk_count, bulk_weights)
        if mixed:
            _follow_mixed(
                first, count, targets, stress_controlled, thermal, pairs, G2, shear_count, shear_weights, K, bulk_count,
                bulk_weights, strain, theta, h, p, e, strain_out, stress_out,
            )  # fmt: skip
        else:
            _follow_strains(
                first, count, targets, thermal, pairs, G2, shear_count, shear_weights, K, bulk_count, bulk_weights,
                strain, theta, h, p, e, stress_out,
            )  # fmt: skip
        forget(h)
        forget(p)


def _compiled(stamp: int) -> Callable[..., None]:
    """`run_members` with its tuples taken apart: what is kept on disk knows no class of ours, which may change."""

    @kept
    def run(
        kind: int,
        A: float,
        B: float,
        dxi: FloatArray,
        targets: FloatArray,
        stress_controlled: BoolArray,
        thermal: FloatArray,
        G2: FloatArray,
        shear_terms: FloatArray,
        shear_count: int,
        shear_given: FloatArray,
        K: FloatArray,
        bulk_terms: FloatArray,
        bulk_count: int,
        bulk_given: FloatArray,
        strain: FloatArray,
        theta: FloatArray,
        h: FloatArray,
        p: FloatArray,
        strain_out: FloatArray,
        stress_out: FloatArray,
    ) -> None:
        shear_weights = np.zeros((h.shape[1], (CHUNK + 1) * ROW))  # the last row stays that of an increment of nothing
        bulk_weights = np.zeros((p.shape[1], (CHUNK + 1) * ROW))
        shear_weights[:, CHUNK * ROW : CHUNK * ROW + TILE] = 1.0
        pairs, values = np.zeros(CHUNK // 2, dtype=np.int64), np.zeros(CHUNK)
        e = np.zeros((CHUNK, 6))
        for j in range(dxi.shape[0] if stamp >= 0 else 0):  # a stamp never is below 0
            _follow_member(
                kind, A, B, dxi[j], targets[min(j, targets.shape[0] - 1)], stress_controlled, thermal[j],
                G2[j], shear_terms[j], shear_count, shear_given[j], K[j], bulk_terms[j], bulk_count, bulk_given[j],
                strain[j], theta[j], h[j], p[j], strain_out[j], stress_out[j],
                shear_weights, bulk_weights, pairs, values, e,
            )  # fmt: skip

    return run


_run = _compiled(source_stamp(__file__, packing.__file__, term_kernels.__file__, weight_kernels.__file__))


def run_members(
    form: Form,
    dxi: FloatArray,
    targets: FloatArray,
    stress_controlled: BoolArray,
    thermal: FloatArray,
    shear: Terms,
    bulk: Terms,
    state: State,
    strain_out: FloatArray,
    stress_out: FloatArray,
) -> None:
    r"""Carry each member over the increments of a block, in place, and write the histories; the interpreter lock is free.

    Parameters
    ----------
    form : Form
        Of the recursion.
    dxi : (members, n)
        Reduced times [s], finite and ``>= 0``.
    targets : (members or 1, n, 6)
        End values of each component: stress where `stress_controlled`, strain elsewhere (Mandel).
    stress_controlled : (6,) bool
    thermal : (members, n)
        Increments of the thermal volume strain, :math:`3 \alpha \Delta T`.
    shear, bulk : Terms
        :math:`2 G` and :math:`K`.
    state : State
    strain_out : (members, n, 6)
        Left alone where all strains are given: it would repeat `targets`.
    stress_out : (members, n or n + 1, 6)
        An even number of rows; what fills them up is of no meaning.
    """
    kind, A, B = form
    if kind == EXPONENTIAL and float(dxi.min(initial=np.inf)) * min(shear.slowest, bulk.slowest) >= SMALLEST:
        kind = AWAY_FROM_0
    _run(
        kind, A, B, dxi, targets, stress_controlled, thermal, shear.equilibrium, shear.packed, shear.width, shear.given,
        bulk.equilibrium, bulk.packed, bulk.width, bulk.given, *state, strain_out, stress_out,
    )  # fmt: skip
