"""An estimate of the truth where no closed response exists: general control, refined until it settles."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from drivers.hereditary import bracketed_gains
from drivers.history import History
from drivers.path import Path, segment_blocks
from matlib.arrays import FloatArray
from matlib.material import Material
from matlib.routine import Block
from matlib.tensors import (
    DEVIATORIC,
    IDENTITY,
    VOLUMETRIC,
    mandel_from_strain,
    mandel_from_stress,
    strain_from_mandel,
    stress_from_mandel,
)

__all__ = ["RefinedSolution", "refined_solution"]

EPS = float(np.finfo(np.float64).eps)

LARGEST_RUN = 40_000
"""Increments of the finest run at most; the estimated bound says how far it got."""

SAFETY = 2.0
"""Half-width in units of the estimated error, for what an estimate does not see."""

SMOOTH = 1.0 / 3.0
"""A change that falls at least to this fraction when increments are halved is of second order, or near to it."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RefinedSolution:
    """An extrapolated response and the estimate of its error."""

    history: History
    strain_bound: FloatArray
    pieces: int


@dataclass(slots=True)
class _Point:
    """State: strain, mechanical volume strain, relaxing deviatoric and mean stresses."""

    strain: FloatArray
    theta: float
    h: FloatArray
    p: FloatArray


@dataclass(frozen=True, slots=True)
class _Run:
    """Response at the increment ends of the path; strain and stress as named components, shape (n, 6)."""

    segment: tuple[str, ...]
    time: FloatArray
    temperature: FloatArray
    reduced_time: FloatArray
    ends: np.ndarray
    strain: FloatArray
    stress: FloatArray


def refined_solution(material: Material, path: Path, accuracy: float) -> RefinedSolution:
    """Halve the increments until the response settles, and extrapolate.

    Parameters
    ----------
    material : Material
    path : Path
    accuracy : float
        Estimated error to aim at, as a fraction of the peak.

    Notes
    -----
    Strain is taken straight in time over an increment; what that leaves out is the curvature of the free strains, of second
    order, so that a third of the last change is the error and is taken off. Where the changes fall like that, the error left is
    estimated by the change of the extrapolated values; where they do not, as with terms that relax within an increment, by the
    last change itself.
    """
    factor = 2
    runs = [_run(material, path, 1), _run(material, path, 2)]
    strain, strain_bound, strain_share = _settled([run.strain for run in runs], 2 * path.increment_count)
    stress, stress_bound, stress_share = _settled([run.stress for run in runs], 2 * path.increment_count)
    while max(strain_share, stress_share) > accuracy and 2 * factor * path.increment_count <= LARGEST_RUN:
        factor *= 2
        runs = [*runs[-2:], _run(material, path, factor)]
        strain, strain_bound, strain_share = _settled([run.strain for run in runs], factor * path.increment_count)
        stress, stress_bound, stress_share = _settled([run.stress for run in runs], factor * path.increment_count)
    return RefinedSolution(
        history=History(
            segment=runs[-1].segment,
            time=runs[-1].time,
            temperature=runs[-1].temperature,
            reduced_time=runs[-1].reduced_time,
            strain=mandel_from_strain(strain),
            stress=mandel_from_stress(stress),
            peak_stress=float(np.abs(stress).max()),
            bound=stress_bound,
            ends=runs[-1].ends,
        ),
        strain_bound=strain_bound,
        pieces=factor * path.increment_count,
    )


def _settled(values: list[FloatArray], increments: int) -> tuple[FloatArray, FloatArray, float]:
    """Extrapolated rows, their estimated half-width on any component, and the largest as a fraction of the peak."""
    last = values[-1] - values[-2]
    best = values[-1] + last / 3.0
    estimate = last
    if len(values) == 3:
        before = values[-2] - values[-3]
        if np.abs(last).max() <= SMOOTH * np.abs(before).max():
            estimate = best - (values[-2] + before / 3.0)
    peak = float(np.abs(best).max())
    bound = SAFETY * np.maximum.accumulate(np.abs(estimate).max(axis=1)) + EPS * increments * peak
    return best, bound, float(bound.max()) / (peak or 1.0)


def _run(material: Material, path: Path, factor: int) -> _Run:
    """Response with `factor` times the increments, at the increment ends of the path."""
    point = _Point(np.zeros(6), 0.0, np.zeros((6, material.shear.times.size)), np.zeros(material.bulk.times.size))
    stress, time, T, xi = np.zeros(6), 0.0, path.start_temperature, 0.0
    labels, rows, ends = ["start"], [(0.0, T, 0.0)], [True]
    strains, stresses = [np.zeros(6)], [np.zeros(6)]
    for _, label, segment in path.refined(factor).unrolled():
        values = np.where(segment.stress_controlled, stress, point.strain)
        done = 0
        for block in segment_blocks(segment, time, T, values):
            for k, (dxi, end) in enumerate(_increments(material, block, point)):
                xi += dxi
                stress = end
                done += 1
                if block.duration[k] == 0.0 or done % factor == 0:
                    done = 0
                    labels.append(label)
                    rows.append((float(block.time_end[k]), float(block.temperature[k + 1]), xi))
                    strains.append(point.strain.copy())
                    stresses.append(stress)
            T = float(block.temperature[-1])
        time += segment.duration
        ends += [False] * (len(labels) - len(ends) - 1) + [True]
    times, temperatures, clocks = np.array(rows).T
    return _Run(
        segment=tuple(labels),
        time=times,
        temperature=temperatures,
        reduced_time=clocks,
        ends=np.array(ends),
        strain=strain_from_mandel(np.array(strains)),
        stress=stress_from_mandel(np.array(stresses)),
    )


def _increments(material: Material, block: Block, point: _Point) -> Iterator[tuple[float, FloatArray]]:
    """Take each increment of a block: its reduced time and the stress at its end; `point` moves along."""
    shear, bulk, free = material.shear, material.bulk, block.stress_controlled
    # Increments are refined as a whole, and not cut: what the clock bends inside them is of second order as well.
    gains = bracketed_gains(
        material.shift, block.duration, block.temperature, np.concatenate([shear.times, bulk.times])
    )
    ms = shear.times.size
    G_i, K_i = gains.gain[:, :ms] * shear.moduli, gains.gain[:, ms:] * bulk.moduli
    G, K = shear.equilibrium + G_i.sum(axis=1), bulk.equilibrium + K_i.sum(axis=1)
    C = 2.0 * G[:, np.newaxis, np.newaxis] * DEVIATORIC + 3.0 * K[:, np.newaxis, np.newaxis] * VOLUMETRIC
    softness = np.linalg.inv(C[:, free][:, :, free])
    thermal = 3.0 * material.expansion * np.diff(block.temperature)
    for k, target in enumerate(block.targets):
        decay = gains.decay[k]
        kept_h, kept_p = decay[:ms] * point.h, decay[ms:] * point.p
        kept = (
            2.0 * shear.equilibrium * (DEVIATORIC @ point.strain)
            + kept_h.sum(axis=1)
            + (bulk.equilibrium * point.theta + kept_p.sum() - K[k] * thermal[k]) * IDENTITY
        )
        step = np.where(free, 0.0, target - point.strain)
        step[free] = softness[k] @ (target - kept - C[k] @ step)[free]
        mechanical = float(step[:3].sum() - thermal[k])
        point.strain = np.where(free, point.strain + step, target)
        point.theta += mechanical
        point.h = kept_h + 2.0 * np.outer(DEVIATORIC @ step, G_i[k])
        point.p = kept_p + K_i[k] * mechanical
        yield float(gains.dxi[k]), kept + C[k] @ step
