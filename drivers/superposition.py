"""Carry the hereditary integrals of all terms and inputs along a path, and add up its components with their half-widths."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from drivers.hereditary import Gains
from matlib.arrays import FloatArray
from matlib.mode_kernels import ExpKernel, ModeResponse

__all__ = ["Rows", "Stretch", "laid_out", "recurred", "superposed"]

EPS = float(np.finfo(np.float64).eps)

KERNEL_ROUNDING = 1e-13
"""Relative accuracy of the poles and residues of a mode's kernel; measured at 4e-15 against arbitrary precision."""

CHUNK = 1_000_000  # numbers in one array of rows, terms and inputs

Key = tuple[int, float]
Terms = tuple[tuple[str, ExpKernel], ...]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stretch:
    """One segment as it runs: its increments, and its inputs at their ends.

    Parameters
    ----------
    key : (int, float)
        Number among the distinct segments, and temperature at the start [K]: equal keys, equal gains.
    label : str
    time, duration : ndarray, shape (n,)
        End of each increment and its length [s].
    T : ndarray, shape (n + 1,)
        Temperature [K], the start included.
    inputs, roundings : dict of str to ndarray, shape (n + 1,)
        Each input, and the half-width that rounding leaves of it up to there.
    """

    key: Key
    label: str
    time: FloatArray
    duration: FloatArray
    T: FloatArray
    inputs: dict[str, FloatArray]
    roundings: dict[str, FloatArray]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Rows:
    """Reduced time [s] and named components at increment ends, with half-widths; shapes (n,) and (n, 6)."""

    xi: FloatArray
    strain: FloatArray
    stress: FloatArray
    strain_error: FloatArray
    stress_error: FloatArray


@dataclass(slots=True)
class _State:
    """Integrals of every term and input, shape (m, c), and of reduced time by input, shape (c,), with half-widths."""

    v: FloatArray
    v_error: FloatArray
    q: FloatArray
    q_error: FloatArray
    xi: float


def superposed(
    response: ModeResponse,
    stretches: Sequence[Stretch],
    times: FloatArray,
    gains: Mapping[Key, Gains],
    *,
    gaps: bool = True,
) -> Iterator[Rows]:
    """Response along a path.

    Parameters
    ----------
    response : ModeResponse
        Kernels of the components.
    stretches : sequence of Stretch
    times : ndarray, shape (m,)
        All times of the kernels, ascending.
    gains : dict of Gains
        Of each stretch, by its key.
    gaps : bool, optional
        Whether half-widths hold the brackets of the gains, or rounding alone.

    Yields
    ------
    Rows
        A limited number of increment ends at a time, in order.
    """
    names = list(stretches[0].inputs)
    m, c = times.size, len(names)
    state = _State(np.zeros((m, c)), np.zeros((m, c)), np.zeros(c), np.zeros(c), 0.0)
    size = max(1, CHUNK // max(m * c, 1))
    for stretch in stretches:
        g = gains[stretch.key]
        u, slack = (np.stack([a[name] for name in names], axis=1) for a in (stretch.inputs, stretch.roundings))
        for start in range(0, stretch.duration.size, size):
            part = slice(start, min(start + size, stretch.duration.size))
            yield _carried(response, names, times, g, part, u, slack, state, gaps)


def _carried(
    response: ModeResponse,
    names: list[str],
    times: FloatArray,
    g: Gains,
    part: slice,
    u: FloatArray,
    slack: FloatArray,
    state: _State,
    gaps: bool,
) -> Rows:
    """Carry `state` over the increments of `part`."""
    before, after = u[part], u[part.start + 1 : part.stop + 1]
    du = after - before
    step = np.abs(du)
    slack = slack[part.start + 1 : part.stop + 1]
    moved = np.where(step > 0.0, 2.0 * slack, 0.0)  # both ends of a step are rounded; a hold is not
    decay, gain = g.decay[part], g.gain[part]
    gain_error = g.gain_rounding[part] + (g.gain_gap[part] if gaps else 0.0)
    v, size = recurred(decay, gain[:, :, np.newaxis] * du[:, np.newaxis, :], state.v)
    earlier = np.abs(np.concatenate([state.v[np.newaxis], v[:-1]]))
    source = g.decay_rounding[part][:, :, np.newaxis] * earlier
    source += gain_error[:, :, np.newaxis] * step[:, np.newaxis, :] + gain[:, :, np.newaxis] * moved[:, np.newaxis, :]
    v_error, _ = recurred(decay, source + 4.0 * EPS * size, state.v_error)

    dxi = g.dxi[part][:, np.newaxis]
    lag_error = g.lag_rounding[part] + (g.lag_gap[part] if gaps else 0.0)
    q = state.q + np.cumsum(dxi * before + g.lag[part][:, np.newaxis] * du, axis=0)
    source = g.dxi_rounding[part][:, np.newaxis] * np.abs(before) + lag_error[:, np.newaxis] * step + dxi * slack
    q_error = state.q_error + np.cumsum(source + 4.0 * EPS * (np.abs(q) + dxi * np.abs(before)), axis=0)
    xi = state.xi + np.cumsum(g.dxi[part])

    state.v, state.v_error, state.q, state.q_error, state.xi = v[-1], v_error[-1], q[-1], q_error[-1], float(xi[-1])
    fields = _Fields(names, times, after, slack, v, v_error, q, q_error)
    strain, strain_error = _components(response.strain, fields)
    stress, stress_error = _components(response.stress, fields)
    return Rows(xi=xi, strain=strain, stress=stress, strain_error=strain_error, stress_error=stress_error)


def recurred(decay: FloatArray, source: FloatArray, start: FloatArray) -> tuple[FloatArray, FloatArray]:
    """``x[k] = decay[k] x[k-1] + source[k]`` from `start`, and what was added up to it without regard to sign.

    Blocks of increments run side by side from zero, and what each starts with is added afterwards.

    Parameters
    ----------
    decay : ndarray, shape (n, m)
    source : ndarray, shape (n, m, c)
    start : ndarray, shape (m, c)

    Returns
    -------
    x, size : ndarray, shape (n, m, c)
    """
    n, m, c = source.shape
    length = math.isqrt(n - 1) + 1
    blocks = -(-n // length)
    x = np.zeros((blocks * length, m, c))
    kept = np.ones((blocks * length, m))
    x[:n], kept[:n] = source, decay
    x, kept = x.reshape(blocks, length, m, c), kept.reshape(blocks, length, m)
    for k in range(1, length):
        x[:, k] += kept[:, k, :, np.newaxis] * x[:, k - 1]
        kept[:, k] *= kept[:, k - 1]
    starts = np.empty((blocks, m, c))
    starts[0] = start
    for b in range(1, blocks):
        starts[b] = x[b - 1, -1] + kept[b - 1, -1, :, np.newaxis] * starts[b - 1]
    passed = kept[:, :, :, np.newaxis] * starts[:, np.newaxis]
    size = (np.abs(x) + np.abs(passed)).reshape(blocks * length, m, c)[:n]
    return (x + passed).reshape(blocks * length, m, c)[:n], size


@dataclass(slots=True)
class _Fields:
    """What components are added up from: inputs `u` with their `slack`, integrals `v` and `q`."""

    names: list[str]
    times: FloatArray
    u: FloatArray
    slack: FloatArray
    v: FloatArray
    v_error: FloatArray
    q: FloatArray
    q_error: FloatArray


def laid_out(times: FloatArray, kernel: ExpKernel) -> FloatArray:
    """Amplitudes of a kernel laid out on the common `times`."""
    laid = np.zeros(times.size)
    np.add.at(laid, np.searchsorted(times, kernel.times), kernel.amplitudes)
    return laid


def _components(components: dict[int, Terms], f: _Fields) -> tuple[FloatArray, FloatArray]:
    """Six components and their half-widths, shapes (n, 6)."""
    values, errors = np.zeros((f.u.shape[0], 6)), np.zeros((f.u.shape[0], 6))
    for component, terms in components.items():
        for name, kernel in terms:
            i = f.names.index(name)
            a = laid_out(f.times, kernel)
            magnitude = np.abs(a)
            u, v = kernel.constant * f.u[:, i], f.v[:, :, i]
            values[:, component] += u + v @ a
            error = f.v_error[:, :, i] @ magnitude + abs(kernel.constant) * f.slack[:, i]
            size = np.abs(u) + np.abs(v) @ magnitude
            if kernel.slope != 0.0:
                flow = kernel.slope * f.q[:, i]
                values[:, component] += flow
                error += abs(kernel.slope) * f.q_error[:, i]
                size += np.abs(flow)
            is_exact = kernel.times.size == 0 and kernel.slope == 0.0
            errors[:, component] += error + (4.0 * EPS if is_exact else KERNEL_ROUNDING) * size
    return values, errors
