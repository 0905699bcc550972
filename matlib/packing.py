r"""What the compiled kernels take: series in tiles of terms, the state of a point, the form of a recursion.

The first axis of every array is that of the members of an ensemble; a single material has one.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal, NamedTuple

import numpy as np

from matlib.arrays import FloatArray
from matlib.prony import PronySeries

__all__ = [
    "AWAY_FROM_0",
    "EXPONENTIAL",
    "FOURS",
    "GIVEN",
    "MIDPOINT",
    "RATIONAL",
    "SMALLEST",
    "TILE",
    "Form",
    "State",
    "Terms",
    "pack",
    "pack_members",
    "pack_weights",
]

TILE = 32
"""Terms of one tile. Rows of a tile stand at fixed distances, which lets the compiler make vector instructions of loops."""

FOURS = -4
"""``count & FOURS`` is `count`, and tells the compiler that it is a multiple of four: no terms are left over."""

SMALLEST = 1e-200
"""Where no increment is shorter, in relaxation times, a modulus divided by that is a number."""

GIVEN, EXPONENTIAL, MIDPOINT, RATIONAL, AWAY_FROM_0 = range(5)
Kind = Literal["exponential", "midpoint", "rational"]
_KINDS = {"exponential": EXPONENTIAL, "midpoint": MIDPOINT, "rational": RATIONAL}


class Form(NamedTuple):
    """Which compiled functions are the decay and the gain of a recursion.

    Parameters
    ----------
    kind : int
        `EXPONENTIAL`; `MIDPOINT`; `RATIONAL`, :math:`(1 - a r)/(1 + b r)` and :math:`1/(1 + b r)`; or `GIVEN`, weights that
        are handed over.
    a, b : float
    """

    kind: int = GIVEN
    a: float = 0.0
    b: float = 0.0

    @classmethod
    def named(cls, kind: Kind, a: float = 0.0, b: float = 0.0) -> Form:
        """The form of that name."""
        return cls(_KINDS[kind], a, b)

    @property
    def compiled(self) -> bool:
        """Whether there are compiled functions."""
        return self.kind != GIVEN


AS_GIVEN = Form()
"""The form of a recursion that has no compiled functions of its own."""


class Terms(NamedTuple):
    r"""A series as the kernels take it.

    Parameters
    ----------
    equilibrium : ndarray, shape (members,)
    packed : ndarray, shape (members, tiles, 3 * TILE)
        :math:`1/\tau_i`, the modulus, and :math:`\tau_i` times it, each `TILE` long; zeros where there is no term.
    width : int
        Terms, rounded up to a multiple of four; those that are not there relax nothing.
    given : ndarray, shape (members, n, tiles, 2 * TILE)
        Decay, and modulus times gain, of each increment where the form is `GIVEN`; else empty.
    slowest : float
        The least :math:`1/\tau_i` of all members [1/s]; infinite without terms, 0 where a product in `packed` is too large.
    """

    equilibrium: FloatArray
    packed: FloatArray
    width: int
    given: FloatArray
    slowest: float


class State(NamedTuple):
    """What a point remembers, changed in place.

    Parameters
    ----------
    strain : ndarray, shape (members, 6)
    theta : ndarray, shape (members, 1)
        Mechanical volume strain.
    h : ndarray, shape (members, tiles, 6 * TILE)
        Relaxing deviatoric stresses, components in turn.
    p : ndarray, shape (members, tiles, TILE)
        Relaxing mean stresses.
    """

    strain: FloatArray
    theta: FloatArray
    h: FloatArray
    p: FloatArray

    @classmethod
    def at_rest(cls, shear: Terms, bulk: Terms) -> State:
        """All zero."""
        members, tiles = shear.packed.shape[:2]
        h = np.zeros((members, tiles, 6 * TILE))
        return cls(np.zeros((members, 6)), np.zeros((members, 1)), h, np.zeros((members, bulk.packed.shape[1], TILE)))

    @classmethod
    def unpacked(cls, strain: FloatArray, memory: FloatArray, shear_terms: int, bulk_terms: int) -> State:
        """Of a single material, from a strain and the memory of its routine, both copied."""
        p, h = memory[1 : 1 + bulk_terms], memory[1 + bulk_terms :].reshape(6, shear_terms)
        return cls(
            strain=strain[np.newaxis].copy(),
            theta=memory[np.newaxis, :1].copy(),
            h=_tiled(h).reshape(1, -1, 6 * TILE),
            p=_tiled(p)[np.newaxis],
        )

    def memory(self, shear_terms: int, bulk_terms: int) -> FloatArray:
        """The memory of the routine of a single material."""
        h = self.h[0].reshape(-1, 6, TILE).transpose(1, 0, 2).reshape(6, -1)[:, :shear_terms]
        return np.concatenate([self.theta[0], self.p.ravel()[:bulk_terms], h.ravel()])


def _tiled(rows: FloatArray) -> FloatArray:
    """Rows of terms, shape (..., terms), as shape (tiles, ..., TILE), filled with zeros."""
    terms = rows.shape[-1]
    tiles = max(1, -(-terms // TILE))
    filled = np.zeros((*rows.shape[:-1], tiles * TILE))
    filled[..., :terms] = rows
    return np.ascontiguousarray(np.moveaxis(filled.reshape(*rows.shape[:-1], tiles, TILE), -2, 0))


def pack(series: PronySeries, factor: float = 1.0) -> Terms:
    """A series for the kernels, its moduli times `factor`.

    Examples
    --------
    >>> terms = pack(PronySeries(equilibrium=1.0, moduli=[2.0], times=[4.0]), factor=2.0)
    >>> terms.equilibrium.tolist(), terms.width, terms.packed[0, 0, [0, TILE, 2 * TILE]].tolist()
    ([2.0], 4, [0.25, 4.0, 16.0])
    """
    return pack_members([series], factor)


def pack_members(each: Sequence[PronySeries], factor: float = 1.0) -> Terms:
    """Several series side by side, filled up to the longest with terms that are not there."""
    most = max(series.times.size for series in each)
    tiles = max(1, -(-most // TILE))
    times, moduli = np.full((len(each), tiles * TILE), np.inf), np.zeros((len(each), tiles * TILE))
    for j, series in enumerate(each):
        times[j, : series.times.size], moduli[j, : series.times.size] = series.times, series.moduli
    with np.errstate(over="ignore", under="ignore", invalid="ignore"):
        rates = np.minimum(1.0 / times, np.finfo(np.float64).max)
        moduli *= factor
        per_rate = np.where(np.isfinite(times), moduli * times, 0.0)
    slowest = float(rates.min(where=rates > 0.0, initial=np.inf)) if np.isfinite(per_rate).all() else 0.0
    rows = np.stack([row.reshape(len(each), tiles, TILE) for row in (rates, moduli, per_rate)], axis=2)
    return Terms(
        equilibrium=np.array([factor * series.equilibrium for series in each]),
        packed=rows.reshape(len(each), tiles, 3 * TILE),
        width=-(-most // 4) * 4,
        given=np.empty((len(each), 0, tiles, 2 * TILE)),
        slowest=slowest,
    )


def pack_weights(terms: Terms, decay: FloatArray, gain: FloatArray) -> Terms:
    """The same terms with decay and gain of each increment, both of shape (n, terms), handed over."""
    moduli = terms.packed[0, :, TILE : 2 * TILE].ravel()[: decay.shape[1]]
    tiled = _tiled(np.stack([decay, gain * moduli], axis=1))  # (tiles, n, 2, TILE)
    given = np.ascontiguousarray(np.moveaxis(tiled, 0, 1)).reshape(1, decay.shape[0], -1, 2 * TILE)
    return terms._replace(given=given)
