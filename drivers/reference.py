"""The reference solution: the hereditary integral of a path to a stated error, which everything is judged against.

It shares no code with the update under test: no recursion, no compiled kernel. Where the mode has a closed response in reduced
time (every named mode under one kind of control, and components that all follow strains) the bound is guaranteed; elsewhere it is
estimated by refinement, and the result says so.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from drivers.hereditary import Gains, bracketed_gains
from drivers.history import History
from drivers.path import Path, Segment, segment_blocks
from drivers.refinement import refined_solution
from matlib.arrays import FloatArray
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.mode_kernels import DRIVEN, MECHANICAL, RESPONSES, THERMAL, ExpKernel, ModeResponse, mode_response
from matlib.routine import Block
from matlib.shift.base import ShiftLaw
from matlib.tensors import mandel_from_strain, mandel_from_stress, strain_from_mandel, stress_from_mandel

__all__ = ["DEFAULT_ACCURACY", "Reference", "has_closed_response", "solve"]

EPS = float(np.finfo(np.float64).eps)

DEFAULT_ACCURACY = 1e-7
"""Guaranteed half-width to aim at, as a fraction of the peak; the value itself is far closer, since chord and tangents err to
opposite sides and are averaged so that their leading errors cancel."""

FIRST_BUDGET, LAST_BUDGET = 300.0, 1e-6
"""Budgets for the gaps of one segment, in units of the accuracy: most of an early gap is forgotten by the end, so the first try is
generous; the last one bounds the time."""

LARGEST_RUN = 100_000  # pieces

KERNEL_ROUNDING = 1e-13
"""Relative accuracy of the poles and residues of a mode's kernel; measured at 4e-15 against arbitrary precision."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Reference:
    """The reference solution of a path.

    Parameters
    ----------
    history : History
        Response at the increment ends of the path, with its column `bound`.
    strain_bound : ndarray, shape (n,)
        Half-width on any strain component of each row [-].
    relative_bound : float
        Largest half-width as a fraction of the peak, of stress or of strain, whichever is the response.
    estimated : bool
        Whether the bound is an estimate by refinement rather than guaranteed.
    pieces : int
        Pieces that the increments were cut into.
    """

    history: History
    strain_bound: FloatArray
    relative_bound: float
    estimated: bool
    pieces: int


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Stretch:
    """One segment as it runs: its increments, and the driven value and thermal strain at their ends."""

    key: tuple[int, float]
    label: str
    time: FloatArray
    duration: FloatArray
    T: FloatArray
    inputs: dict[str, FloatArray]


def has_closed_response(path: Path) -> bool:
    """Whether the bound on this path can be guaranteed: one kind of control throughout, in a named mode or all by strain."""
    masks = {tuple(segment.stress_controlled.tolist()) for segment in path.segments}
    return len(masks) == 1 and (path.mode.name in RESPONSES or not any(next(iter(masks))))


def _response(material: Material, path: Path) -> ModeResponse:
    """Kernels of the path's mode, in named components."""
    if path.mode.name in RESPONSES:
        driven = bool(path.segments[0].stress_controlled[path.mode.driven[0]])
        return mode_response(material.shear, material.bulk, path.mode.name, stress_driven=driven)
    shear, bulk = ExpKernel.of(material.shear), ExpKernel.of(material.bulk)
    volume = ("volume", bulk - (2.0 / 3.0) * shear)
    thermal = (THERMAL, -3.0 * bulk)
    identity = ExpKernel(constant=1.0)
    return ModeResponse(
        strain={c: ((f"strain {c}", identity),) for c in range(6)},
        stress={c: ((f"strain {c}", 2.0 * shear), volume, thermal) for c in range(3)}
        | {c: ((f"strain {c}", shear),) for c in range(3, 6)},
    )


def _stretches(material: Material, path: Path) -> Iterator[_Stretch]:
    """Every segment in running order, with its inputs at all increment ends, the start included."""
    values, time, T = np.zeros(6), 0.0, path.start_temperature
    for index, label, segment in path.unrolled():
        start = T
        blocks = list(segment_blocks(segment, time, T, values))
        temperature = np.concatenate([blocks[0].temperature[:1], *(b.temperature[1:] for b in blocks)])
        targets = np.concatenate([values[np.newaxis], *(b.targets for b in blocks)])
        yield _Stretch(
            key=(index, start),
            label=label,
            time=np.concatenate([b.time + b.duration for b in blocks]),
            duration=np.concatenate([b.duration for b in blocks]),
            T=temperature,
            inputs=_inputs(path, segment, targets, material.expansion * (temperature - path.start_temperature)),
        )
        values, time, T = _end(blocks), time + segment.duration, float(temperature[-1])


def _end(blocks: list[Block]) -> FloatArray:
    return blocks[-1].targets[-1]


def _inputs(path: Path, segment: Segment, targets: FloatArray, thermal: FloatArray) -> dict[str, FloatArray]:
    to_named = np.where(segment.stress_controlled, stress_from_mandel(np.ones(6)), strain_from_mandel(np.ones(6)))
    named = targets * to_named
    if path.mode.driven:
        driven = named[:, path.mode.driven[0]]
        return {DRIVEN: driven, THERMAL: thermal, MECHANICAL: driven - thermal}
    strains = {f"strain {c}": named[:, c] for c in range(6)}
    return {**strains, "volume": named[:, :3].sum(axis=1), THERMAL: thermal}


def solve(material: Material, path: Path, *, accuracy: float = DEFAULT_ACCURACY) -> Reference:
    """Reference solution at the increment ends of a path.

    Parameters
    ----------
    material : Material
    path : Path
        Its increments say where the solution is wanted, not how it is computed.
    accuracy : float, optional
        Half-width to aim at, as a fraction of the peak, from 1e-11 to 1e-2.

    Returns
    -------
    Reference

    Raises
    ------
    ShiftRangeError
        If the path leads the shift law where it has no answer.

    Notes
    -----
    The half-width covers the gap between chord and tangents, and rounding: of the shift factor and the temperatures, magnified by
    the slope of the law, of each sum, and of the kernels.
    """
    if not 1e-11 <= accuracy <= 1e-2:
        raise ParameterError("accuracy", "from 1e-11 to 1e-2", accuracy)
    if not has_closed_response(path):
        return _estimated(material, path, accuracy)
    response = _response(material, path)
    stretches = list(_stretches(material, path))
    kernels = [kernel for terms in (*response.strain.values(), *response.stress.values()) for _, kernel in terms]
    times = np.unique(np.concatenate([kernel.times for kernel in kernels] or [np.empty(0)]))
    ramps = _Ramps.of(material, response, stretches, times)
    budget = FIRST_BUDGET * accuracy
    while True:
        solution = _assembled(path, response, stretches, times, ramps.gains(budget))
        if solution.relative_bound <= accuracy or budget <= accuracy * LAST_BUDGET or ramps.exhausted:
            return solution
        budget *= min(0.3, max(0.003, 0.5 * accuracy / solution.relative_bound))


def _weights(response: ModeResponse, times: FloatArray, names: list[str]) -> dict[str, FloatArray]:
    """How much each term of each input weighs in the largest component, by quantity: shape (inputs, m)."""
    weights = {}
    for quantity, components in (("strain", response.strain), ("stress", response.stress)):
        largest = np.zeros((len(names), times.size))
        for terms in components.values():
            one = np.zeros_like(largest)
            for name, kernel in terms:
                one[names.index(name)] += _on(times, np.abs(kernel.amplitudes), kernel.times)
            largest = np.maximum(largest, one)
        weights[quantity] = largest
    return weights


def _on(times: FloatArray, amplitudes: FloatArray, own: FloatArray) -> FloatArray:
    """Amplitudes laid out on the common times."""
    laid = np.zeros(times.size)
    np.add.at(laid, np.searchsorted(times, own), amplitudes)
    return laid


@dataclass(slots=True, kw_only=True, eq=False)
class _Ramps:
    """The distinct segments of a run, and what their gains are worth."""

    law: ShiftLaw
    times: FloatArray
    first: dict[tuple[int, float], _Stretch]
    importance: dict[tuple[int, float], FloatArray]
    made: dict[tuple[int, float], Gains]
    exhausted: bool = False

    @classmethod
    def of(cls, material: Material, response: ModeResponse, stretches: list[_Stretch], times: FloatArray) -> _Ramps:
        """Weigh every gain by a coarse pass, which gives the size of the response."""
        names = list(stretches[0].inputs)
        weights = _weights(response, times, names)
        changes: dict[tuple[int, float], FloatArray] = {}
        first: dict[tuple[int, float], _Stretch] = {}
        for stretch in stretches:
            steps = np.stack([np.abs(np.diff(stretch.inputs[name])) for name in names], axis=1)
            changes[stretch.key] = np.maximum(changes.get(stretch.key, 0.0), steps)
            first.setdefault(stretch.key, stretch)
        nothing = {key: np.zeros((s.duration.size, times.size)) for key, s in first.items()}
        ramps = cls(law=material.shift, times=times, first=first, importance=nothing, made={})
        for key, s in first.items():
            ramps.made[key] = bracketed_gains(material.shift, s.duration, s.T, times, nothing[key], 1.0)
        for quantity, peak in _peaks(response, stretches, times, ramps.made).items():
            if peak > 0.0:
                for key, change in changes.items():
                    ramps.importance[key] = np.maximum(ramps.importance[key], change @ weights[quantity] / peak)
        return ramps

    def gains(self, budget: float) -> dict[tuple[int, float], Gains]:
        """Gains of every distinct segment, each to the budget where its temperature changes."""
        before = sum(gains.pieces for gains in self.made.values())
        for key, s in self.first.items():
            if np.any(s.T != s.T[0]):
                self.made[key] = bracketed_gains(self.law, s.duration, s.T, self.times, self.importance[key], budget)
        self.exhausted = before > LARGEST_RUN and before == sum(gains.pieces for gains in self.made.values())
        return self.made


def _peaks(
    response: ModeResponse, stretches: list[_Stretch], times: FloatArray, gains: dict[tuple[int, float], Gains]
) -> dict[str, float]:
    peaks = {"strain": 0.0, "stress": 0.0}
    for rows in _march(response, stretches, times, gains):
        peaks["strain"] = max(peaks["strain"], float(np.abs(rows.strain).max()))
        peaks["stress"] = max(peaks["stress"], float(np.abs(rows.stress).max()))
    return peaks


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Rows:
    """Components at the increment ends of one stretch, in their names' order, with half-widths."""

    stretch: _Stretch
    xi: FloatArray
    strain: FloatArray
    stress: FloatArray
    strain_error: FloatArray
    stress_error: FloatArray


def _march(
    response: ModeResponse, stretches: list[_Stretch], times: FloatArray, gains: dict[tuple[int, float], Gains]
) -> Iterator[_Rows]:
    """Carry the integrals of all terms and inputs along the path."""
    names = list(stretches[0].inputs)
    m, c = times.size, len(names)
    v, w = np.zeros((m, c)), np.zeros((m, c))  # integrals and their half-widths
    q, q_error = np.zeros(c), np.zeros(c)
    xi = 0.0
    for stretch in stretches:
        g = gains[stretch.key]
        u = np.stack([stretch.inputs[name] for name in names], axis=1)
        du = np.diff(u, axis=0)
        n = du.shape[0]
        V, W = np.empty((n, m, c)), np.empty((n, m, c))
        Q, Q_error = np.empty((n, c)), np.empty((n, c))
        for k in range(n):
            step = np.abs(du[k])
            w = g.decay[k, :, None] * w + g.decay_error[k, :, None] * np.abs(v) + g.gain_error[k, :, None] * step
            v = g.decay[k, :, None] * v + g.gain[k, :, None] * du[k]
            w += 2.0 * EPS * np.abs(v)
            q_error = q_error + g.dxi[k] * g.clock_error[k] * np.abs(u[k]) + g.lag_error[k] * step
            q = q + g.dxi[k] * u[k] + g.lag[k] * du[k]
            q_error += 2.0 * EPS * np.abs(q)
            V[k], W[k], Q[k], Q_error[k] = v, w, q, q_error
        ends = xi + np.cumsum(g.dxi)
        strain, strain_error = _components(response.strain, names, times, u[1:], V, W, Q, Q_error)
        stress, stress_error = _components(response.stress, names, times, u[1:], V, W, Q, Q_error)
        yield _Rows(
            stretch=stretch, xi=ends, strain=strain, stress=stress, strain_error=strain_error, stress_error=stress_error
        )
        xi = float(ends[-1])


def _components(
    components: dict[int, tuple[tuple[str, ExpKernel], ...]],
    names: list[str],
    times: FloatArray,
    u: FloatArray,
    V: FloatArray,
    W: FloatArray,
    Q: FloatArray,
    Q_error: FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Six components and their half-widths at n increment ends, shapes (n, 6)."""
    values, errors = np.zeros((u.shape[0], 6)), np.zeros((u.shape[0], 6))
    for component, terms in components.items():
        for name, kernel in terms:
            i = names.index(name)
            a = _on(times, kernel.amplitudes, kernel.times)
            part = V[:, :, i] @ a
            values[:, component] += kernel.constant * u[:, i] + part
            size = np.abs(kernel.constant * u[:, i]) + np.abs(V[:, :, i]) @ np.abs(a)
            errors[:, component] += W[:, :, i] @ np.abs(a)
            if kernel.slope != 0.0:
                values[:, component] += kernel.slope * Q[:, i]
                errors[:, component] += abs(kernel.slope) * Q_error[:, i]
                size += np.abs(kernel.slope * Q[:, i])
            exact = kernel.times.size == 0 and kernel.slope == 0.0
            errors[:, component] += (4.0 * EPS if exact else KERNEL_ROUNDING) * size
    return values, errors


def _assembled(
    path: Path,
    response: ModeResponse,
    stretches: list[_Stretch],
    times: FloatArray,
    gains: dict[tuple[int, float], Gains],
) -> Reference:
    rows = list(_march(response, stretches, times, gains))
    labels = ["start"]
    for part in rows:
        labels += [part.stretch.label] * part.xi.size

    def column(name: str) -> FloatArray:
        parts = [getattr(part, name) for part in rows]
        return np.concatenate([np.zeros((1, *parts[0].shape[1:])), *parts])

    strain, stress = column("strain"), column("stress")
    strain_bound, stress_bound = column("strain_error").max(axis=1), column("stress_error").max(axis=1)
    history = History(
        segment=tuple(labels),
        time=np.concatenate([[0.0], *(part.stretch.time for part in rows)]),
        temperature=np.concatenate([[path.start_temperature], *(part.stretch.T[1:] for part in rows)]),
        reduced_time=column("xi"),
        strain=mandel_from_strain(strain),
        stress=mandel_from_stress(stress),
        peak_stress=float(np.abs(stress).max()),
        bound=stress_bound,
    )
    return Reference(
        history=history,
        strain_bound=strain_bound,
        relative_bound=_relative(stress_bound, stress, strain_bound, strain),
        estimated=not all(g.ordered for g in gains.values()),
        pieces=sum(g.pieces for g in gains.values()),
    )


def _relative(stress_bound: FloatArray, stress: FloatArray, strain_bound: FloatArray, strain: FloatArray) -> float:
    """Largest half-width relative to its peak, zero where nothing responds."""
    shares = [
        float(bound.max()) / float(np.abs(values).max())
        for bound, values in ((stress_bound, stress), (strain_bound, strain))
        if np.abs(values).max() > 0.0
    ]
    return max(shares, default=0.0)


def _estimated(material: Material, path: Path, accuracy: float) -> Reference:
    solution = refined_solution(material, path, accuracy)
    history = solution.history
    assert history.bound is not None
    return Reference(
        history=history,
        strain_bound=solution.strain_bound,
        relative_bound=_relative(
            history.bound, history.stress_components, solution.strain_bound, history.strain_components
        ),
        estimated=True,
        pieces=solution.pieces,
    )
