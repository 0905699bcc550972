"""An estimate of the truth where no closed response exists: general control, refined until it settles."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from drivers.hereditary import bracketed_gains
from drivers.history import History
from drivers.path import Path, segment_blocks
from matlib.arrays import FloatArray
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.routine import Block
from matlib.tensors import DEVIATORIC, IDENTITY, isotropic_stiffness, strain_from_mandel, stress_from_mandel

__all__ = ["RefinedSolution", "refined_solution"]

LARGEST_RUN = 40_000
"""Increments of the finest run at most; the estimated bound says how far it got."""

SAFETY = 2.0
"""Half-width in units of the estimated error of the extrapolated value's finer run."""


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
    Strain is taken straight in time over an increment, with the clock inside the increment exact; what is left is the curvature
    of the free strains, of second order, so that a third of the last change is the error and is taken off.
    """
    factor = 1
    coarse = _run(material, path, factor)
    while True:
        fine = _run(material, path, 2 * factor)
        changes = [np.abs(b - a).max(axis=1) for a, b in zip(coarse[1:], fine[1:], strict=True)]
        peaks = [float(np.abs(values).max()) or 1.0 for values in fine[1:]]
        settled = all(change.max() / 3.0 <= accuracy * peak for change, peak in zip(changes, peaks, strict=True))
        factor *= 2
        if settled or 2 * factor * path.increment_count > LARGEST_RUN:
            break
        coarse = fine
    strain, stress = (b + (b - a) / 3.0 for a, b in zip(coarse[1:], fine[1:], strict=True))
    strain_bound, stress_bound = (SAFETY * change / 3.0 for change in changes)
    skeleton = fine[0]
    history = History(
        segment=skeleton.segment,
        time=skeleton.time,
        temperature=skeleton.temperature,
        reduced_time=skeleton.reduced_time,
        strain=strain,
        stress=stress,
        peak_stress=float(np.abs(stress_from_mandel(stress)).max()),
        bound=np.maximum.accumulate(stress_bound),
    )
    return RefinedSolution(
        history=history,
        strain_bound=np.maximum.accumulate(np.abs(strain_from_mandel(np.ones(6))).max() * strain_bound),
        pieces=factor * path.increment_count,
    )


@dataclass(frozen=True, slots=True)
class _Skeleton:
    segment: tuple[str, ...]
    time: FloatArray
    temperature: FloatArray
    reduced_time: FloatArray


def _run(material: Material, path: Path, factor: int) -> tuple[_Skeleton, FloatArray, FloatArray]:
    """Response with `factor` times the increments, at the increment ends of the path (Mandel)."""
    point = _Point(np.zeros(6), 0.0, np.zeros((6, material.shear.times.size)), np.zeros(material.bulk.times.size))
    stress, time, T, xi = np.zeros(6), 0.0, path.start_temperature, 0.0
    labels, times, temperatures, clocks = ["start"], [0.0], [T], [0.0]
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
                    times.append(float(block.time[k] + block.duration[k]))
                    temperatures.append(float(block.temperature[k + 1]))
                    clocks.append(xi)
                    strains.append(point.strain.copy())
                    stresses.append(stress)
            T = float(block.temperature[-1])
        time += segment.duration
    skeleton = _Skeleton(tuple(labels), np.array(times), np.array(temperatures), np.array(clocks))
    return skeleton, np.array(strains), np.array(stresses)


def _increments(material: Material, block: Block, point: _Point):  # type: ignore[no-untyped-def]
    """Take each increment of a block: its reduced time and the stress at its end; `point` moves along."""
    shear, bulk, free = material.shear, material.bulk, block.stress_controlled
    times = np.concatenate([shear.times, bulk.times])
    no_cuts = np.zeros((block.duration.size, times.size))  # the increments themselves are refined
    gains = bracketed_gains(material.shift, block.duration, block.temperature, times, no_cuts, 1.0)
    ms = shear.times.size
    for k, target in enumerate(block.targets):
        decay, gain = gains.decay[k], gains.gain[k]
        thermal = 3.0 * material.expansion * (block.temperature[k + 1] - block.temperature[k])
        G, K = _moduli(shear, gain[:ms]), _moduli(bulk, gain[ms:])
        C = isotropic_stiffness(G, K)
        kept_h, kept_p = decay[:ms] * point.h, decay[ms:] * point.p
        kept = (
            2.0 * shear.equilibrium * (DEVIATORIC @ point.strain)
            + kept_h.sum(axis=1)
            + (bulk.equilibrium * point.theta + kept_p.sum() - K * thermal) * IDENTITY
        )
        step = np.where(free, 0.0, target - point.strain)
        if free.any():
            step[free] = np.linalg.solve(C[np.ix_(free, free)], (target - kept - C @ step)[free])
        mechanical = float(step[:3].sum()) - thermal
        point.strain = np.where(free, point.strain + step, target)
        point.theta += mechanical
        point.h = kept_h + 2.0 * np.outer(DEVIATORIC @ step, gain[:ms] * shear.moduli)
        point.p = kept_p + gain[ms:] * bulk.moduli * mechanical
        yield float(gains.dxi[k]), kept + C @ step


def _moduli(series: PronySeries, gain: FloatArray) -> float:
    return series.equilibrium + float(gain @ series.moduli)
