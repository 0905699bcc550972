"""The reference solution: the hereditary integral of a path to a stated error, which everything is judged against.

It shares no code with the update under test: no recursion, no compiled kernel. Where the mode has a closed response in reduced
time (every named mode under one kind of control, and components that all follow strains) the bound is guaranteed; elsewhere it is
estimated by refinement, and the result says so.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from drivers.hereditary import Gains, bracketed_gains
from drivers.history import History
from drivers.path import Path, Segment, segment_blocks
from drivers.refinement import refined_solution
from drivers.superposition import EPS, Key, Stretch, laid_out, superposed
from matlib.arrays import FloatArray
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.mode_kernels import DRIVEN, MECHANICAL, ONE, RESPONSES, THERMAL, ExpKernel, ModeResponse, mode_response
from matlib.shift.base import ShiftLaw
from matlib.tensors import mandel_from_strain, mandel_from_stress, strain_from_mandel, stress_from_mandel

__all__ = ["DEFAULT_ACCURACY", "Reference", "has_closed_response", "solve"]

DEFAULT_ACCURACY = 1e-9
"""Guaranteed half-width to aim at, as a fraction of the peak."""

FIRST_BUDGET, LAST_BUDGET = 300.0, 1e-6
"""Budgets for the gaps of one segment, in units of the accuracy: most of an early gap is forgotten by the end, so the first try is
generous; the last one bounds the time."""


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
        Largest half-width as a fraction of the peak, of stress or of strain, whichever is larger.
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


def has_closed_response(path: Path) -> bool:
    """Whether the bound on this path can be guaranteed.

    It can where one kind of control holds throughout: in a named mode, its driven components alike and nothing asked of the
    others, or with all components following strains.
    """
    if not path.mode.driven:
        return not any(segment.stress_controlled.any() for segment in path.segments)
    if path.mode.name not in RESPONSES:
        return False
    driven, free = list(path.mode.driven), list(path.mode.free)
    rest = [c for c in range(6) if c not in driven]
    by_stress = path.segments[0].stress_controlled[driven[0]]
    mask = np.zeros(6, dtype=np.bool_)
    mask[free] = True
    mask[driven] = by_stress
    return all(
        np.array_equal(s.stress_controlled, mask)
        and np.all(s.held[driven] == s.held[driven[0]])
        and np.all(s.targets[:, driven] == s.targets[:, driven[:1]])
        and not np.any(s.targets[:, rest] * ~s.held[rest])
        for s in path.segments
    )


def _response(material: Material, path: Path) -> ModeResponse:
    """Kernels of the path's mode, in named components."""
    if path.mode.driven:
        driven = bool(path.segments[0].stress_controlled[path.mode.driven[0]])
        return mode_response(material.shear, material.bulk, path.mode.name, stress_driven=driven)
    shear, bulk = ExpKernel.of(material.shear), ExpKernel.of(material.bulk)
    volume = ("volume", bulk - (2.0 / 3.0) * shear)
    thermal = (THERMAL, -3.0 * bulk)
    return ModeResponse(
        strain={c: ((f"strain {c}", ONE),) for c in range(6)},
        stress={c: ((f"strain {c}", 2.0 * shear), volume, thermal) for c in range(3)}
        | {c: ((f"strain {c}", shear),) for c in range(3, 6)},
    )


def _stretches(material: Material, path: Path) -> Iterator[Stretch]:
    """Every segment in running order, with its inputs at all increment ends, the start included."""
    values, time, T = np.zeros(6), 0.0, path.start_temperature
    largest: dict[str, float] = {}
    for index, label, segment in path.unrolled():
        start = T
        blocks = list(segment_blocks(segment, time, T, values))
        temperature = np.concatenate([blocks[0].temperature[:1], *(b.temperature[1:] for b in blocks)])
        targets = np.concatenate([values[np.newaxis], *(b.targets for b in blocks)])
        inputs = _inputs(path, segment, targets, material.expansion * (temperature - path.start_temperature))
        sizes = _sizes(inputs, np.where(inputs[THERMAL] != 0.0, abs(material.expansion) * temperature, 0.0))
        roundings = {}
        for name, size in sizes.items():
            reached = np.maximum.accumulate(np.maximum(size, largest.get(name, 0.0)))
            largest[name] = float(reached[-1])
            roundings[name] = 4.0 * EPS * reached
        yield Stretch(
            key=(index, start),
            label=label,
            time=np.concatenate([b.time_end for b in blocks]),
            duration=np.concatenate([b.duration for b in blocks]),
            T=temperature,
            inputs=inputs,
            roundings=roundings,
        )
        values, time, T = blocks[-1].targets[-1], time + segment.duration, float(temperature[-1])


def _inputs(path: Path, segment: Segment, targets: FloatArray, thermal: FloatArray) -> dict[str, FloatArray]:
    to_named = np.where(segment.stress_controlled, stress_from_mandel(np.ones(6)), strain_from_mandel(np.ones(6)))
    named = targets * to_named
    if path.mode.driven:
        driven = named[:, path.mode.driven[0]]
        return {DRIVEN: driven, THERMAL: thermal, MECHANICAL: driven - thermal}
    strains = {f"strain {c}": named[:, c] for c in range(6)}
    return {**strains, "volume": named[:, :3].sum(axis=1), THERMAL: thermal}


def _sizes(inputs: dict[str, FloatArray], thermal: FloatArray) -> dict[str, FloatArray]:
    """Magnitudes that the roundings of inputs are parts of; `thermal` is what absolute temperature stands for."""
    sizes = {name: np.abs(values) for name, values in inputs.items()}
    sizes[THERMAL] = thermal
    if MECHANICAL in sizes:
        sizes[MECHANICAL] = sizes[DRIVEN] + thermal
    if "volume" in sizes:
        sizes["volume"] = sum((sizes[f"strain {c}"] for c in range(3)), np.zeros_like(thermal))
    return sizes


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
    ParameterError
        If `accuracy` is out of its range, or the response grows beyond all numbers.

    Notes
    -----
    The half-width covers the gap between chord and tangents, and rounding: of the shift factor and the temperatures, magnified by
    the slope of the law, of each sum, and of the kernels. Where rounding alone takes more than half of `accuracy`, twice what it
    takes is aimed at.
    """
    if not 1e-11 <= accuracy <= 1e-2:
        raise ParameterError("accuracy", "from 1e-11 to 1e-2", accuracy)
    if not has_closed_response(path):
        return _estimated(material, path, accuracy)
    response = _response(material, path)
    stretches = list(_stretches(material, path))
    kernels = [kernel for terms in (*response.strain.values(), *response.stress.values()) for _, kernel in terms]
    times = np.unique(np.concatenate([kernel.times for kernel in kernels]))
    ramps = _Ramps.of(material.shift, stretches, times)
    floor = _assembled(path, response, stretches, times, ramps, gaps=False)
    ramps.weigh(response, stretches, floor.history)
    aim = max(accuracy, 2.0 * floor.relative_bound)
    budget = FIRST_BUDGET * aim
    while True:
        ramps.cut(budget)
        solution = _assembled(path, response, stretches, times, ramps)
        if solution.relative_bound <= aim or budget <= aim * LAST_BUDGET or ramps.exhausted:
            return solution
        budget *= min(0.3, max(0.003, 0.5 * aim / solution.relative_bound))


@dataclass(slots=True, kw_only=True, eq=False)
class _Ramps:
    """The distinct segments of a run, their gains, and what these are worth."""

    law: ShiftLaw
    times: FloatArray
    first: dict[Key, Stretch]
    made: dict[Key, Gains]
    importance: dict[Key, tuple[FloatArray, FloatArray]] = field(default_factory=dict)

    @classmethod
    def of(cls, law: ShiftLaw, stretches: list[Stretch], times: FloatArray) -> _Ramps:
        """Gains without any cutting."""
        first: dict[Key, Stretch] = {}
        for stretch in stretches:
            first.setdefault(stretch.key, stretch)
        made = {key: bracketed_gains(law, s.duration, s.T, times) for key, s in first.items()}
        return cls(law=law, times=times, first=first, made=made)

    def weigh(self, response: ModeResponse, stretches: list[Stretch], coarse: History) -> None:
        """What a unit error of each gain and lag is worth, as a fraction of the peaks of a coarse solution."""
        names = list(stretches[0].inputs)
        weights, lag_weights = np.zeros((len(names), self.times.size)), np.zeros(len(names))
        for components, values in (
            (response.strain, coarse.strain_components),
            (response.stress, coarse.stress_components),
        ):
            peak = float(np.abs(values).max())
            for terms in components.values() if peak > 0.0 else ():
                for i, kernel in ((names.index(name), kernel) for name, kernel in terms):
                    weights[i] = np.maximum(weights[i], np.abs(laid_out(self.times, kernel)) / peak)
                    lag_weights[i] = max(lag_weights[i], abs(kernel.slope) / peak)
        changes: dict[Key, FloatArray] = {}
        for stretch in stretches:
            steps = np.stack([np.abs(np.diff(stretch.inputs[name])) for name in names], axis=1)
            changes[stretch.key] = np.maximum(changes.get(stretch.key, 0.0), steps)
        self.importance = {key: (change @ weights, change @ lag_weights) for key, change in changes.items()}

    def cut(self, budget: float) -> None:
        """Cut every distinct segment to the budget where its temperature changes."""
        for key, s in self.first.items():
            if np.any(s.T != s.T[0]):
                own, lag = self.importance[key]
                self.made[key] = bracketed_gains(
                    self.law, s.duration, s.T, self.times,
                    importance=own, lag_importance=lag, budget=budget, pieces=self.made[key].pieces,
                )  # fmt: skip

    @property
    def exhausted(self) -> bool:
        """Whether a segment could not be cut as far as the budget asked."""
        return any(not gains.within_budget for key, gains in self.made.items() if np.any(np.diff(self.first[key].T)))


def _assembled(
    path: Path,
    response: ModeResponse,
    stretches: list[Stretch],
    times: FloatArray,
    ramps: _Ramps,
    *,
    gaps: bool = True,
) -> Reference:
    with np.errstate(over="ignore", invalid="ignore"):
        rows = list(superposed(response, stretches, times, ramps.made, gaps=gaps))

    def column(name: str) -> FloatArray:
        parts = [getattr(part, name) for part in rows]
        return np.concatenate([np.zeros((1, *parts[0].shape[1:])), *parts])

    strain, stress = column("strain"), column("stress")
    if not (np.isfinite(strain).all() and np.isfinite(stress).all()):
        raise ParameterError("path", "such that strain and stress stay finite", "a response without bound")
    strain_bound, stress_bound = column("strain_error").max(axis=1), column("stress_error").max(axis=1)
    sizes = [stretch.duration.size for stretch in stretches]
    is_end = np.zeros(1 + sum(sizes), dtype=np.bool_)
    is_end[np.concatenate([[0], np.cumsum(sizes)])] = True
    history = History(
        segment=("start", *(stretch.label for stretch in stretches for _ in range(stretch.duration.size))),
        time=np.concatenate([[0.0], *(stretch.time for stretch in stretches)]),
        temperature=np.concatenate([[path.start_temperature], *(stretch.T[1:] for stretch in stretches)]),
        reduced_time=column("xi"),
        strain=mandel_from_strain(strain),
        stress=mandel_from_stress(stress),
        peak_stress=float(np.abs(stress).max()),
        bound=stress_bound,
        ends=is_end,
    )
    return Reference(
        history=history,
        strain_bound=strain_bound,
        relative_bound=_relative(stress_bound, stress, strain_bound, strain),
        estimated=not all(gains.ordered for gains in ramps.made.values()),
        pieces=sum(gains.pieces.row.size for gains in ramps.made.values()),
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
