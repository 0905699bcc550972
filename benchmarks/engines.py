"""Ways to get the same stresses: the package's kernel, the same recursion in C and numpy, and general-purpose solvers."""

from __future__ import annotations

import ctypes
import shutil
import subprocess
import tempfile
from collections.abc import Callable
from pathlib import Path

import numpy as np
from scipy.integrate import solve_ivp
from scipy.signal import lfilter

from benchmarks.case import Case
from matlib.arrays import FloatArray
from matlib.kernels import run_members
from matlib.packing import State, pack
from matlib.tensors import DEVIATORIC, IDENTITY

__all__ = ["C_BUILDS", "Engine", "c_engines", "convolution", "filtered", "integrated", "kernel", "numpy_loop"]

Engine = Callable[[], FloatArray]
"""Gives the stress at every increment end, shape (n, 6)."""

C_BUILDS = {"-O3": ("-O3",), "-O3 -ffast-math": ("-O3", "-ffast-math")}
C_WAYS = {"exp, expm1": "run_formulas", "expm1": "run_shared", "exp": "run_plain"}
_POINTER = ctypes.POINTER(ctypes.c_double)


def kernel(case: Case) -> Engine:
    """The package's compiled kernel, all increments in one call."""
    material, block = case.routine.material, case.block
    shear, bulk = pack(material.shear, 2.0), pack(material.bulk)
    thermal = 3.0 * material.expansion * np.diff(block.temperature)
    stress, nothing = np.empty((case.n + case.n % 2, 6)), np.empty((case.n, 6))
    memory, form = np.zeros(case.routine.memory_size), case.routine.recursion.form

    def run() -> FloatArray:
        state = State.unpacked(np.zeros(6), memory, material.shear.times.size, material.bulk.times.size)
        run_members(
            form,
            case.dxi[np.newaxis],
            block.targets[np.newaxis],
            block.stress_controlled,
            thermal[np.newaxis],
            shear,
            bulk,
            state,
            nothing[np.newaxis],
            stress[np.newaxis],
        )
        return stress[: case.n]

    return run


def c_engines(case: Case) -> tuple[dict[str, Engine], str]:
    """The recursion in C, compiled on the spot; without a compiler none, and the reason.

    Notes
    -----
    Compiled with ``-ffast-math`` but linked without it: at linking the option would set this whole process to flush
    denormal numbers to zero, which no number here needs.
    """
    gcc = shutil.which("gcc")
    if gcc is None:
        return {}, "no gcc on this machine"
    source = Path(__file__).with_name("recursion.c")
    engines: dict[str, Engine] = {}
    for build, flags in C_BUILDS.items():
        with tempfile.TemporaryDirectory() as folder:
            compiled, library = f"{folder}/recursion.o", f"{folder}/recursion.so"
            for command in (
                [gcc, "-std=c11", "-march=native", "-fPIC", *flags, "-c", str(source), "-o", compiled],
                [gcc, "-shared", "-o", library, compiled, "-lmvec", "-lm"],
            ):
                made = subprocess.run(command, capture_output=True, text=True, timeout=120)
                if made.returncode != 0:
                    return {}, f"gcc failed: {made.stderr.strip().splitlines()[-1]}"
            loaded = ctypes.CDLL(library)
        for way, symbol in C_WAYS.items():
            engines[f"C {build} ({way})"] = _c_engine(case, getattr(loaded, symbol))
    return engines, ""


def _c_engine(case: Case, function: Callable[..., None]) -> Engine:
    material, block = case.routine.material, case.block
    rate, modulus = 1.0 / material.shear.times, 2.0 * material.shear.moduli
    thermal = 3.0 * material.expansion * np.diff(block.temperature)
    stress, strain, dxi = np.empty((case.n, 6)), block.targets, case.dxi

    def run() -> FloatArray:
        h = np.zeros((6, rate.size))
        arrays = [a.ctypes.data_as(_POINTER) for a in (dxi, strain, thermal, rate, modulus)]
        function(
            ctypes.c_size_t(case.n),
            ctypes.c_size_t(rate.size),
            *arrays,
            ctypes.c_double(2.0 * material.shear.equilibrium),
            ctypes.c_double(material.bulk.equilibrium),
            h.ctypes.data_as(_POINTER),
            stress.ctypes.data_as(_POINTER),
        )
        return stress

    return run


def _steps(case: Case) -> tuple[FloatArray, FloatArray]:
    """Deviatoric strain increments, and the part of the stress that does not relax."""
    material, block = case.routine.material, case.block
    strain = np.concatenate([np.zeros((1, 6)), block.targets])
    theta = block.targets @ IDENTITY - 3.0 * material.expansion * (block.temperature[1:] - block.temperature[0])
    rest = 2.0 * material.shear.equilibrium * (block.targets @ DEVIATORIC.T)
    return np.diff(strain, axis=0) @ DEVIATORIC.T, rest + np.outer(material.bulk.equilibrium * theta, IDENTITY)


def numpy_loop(case: Case) -> Engine:
    """An increment at a time in Python, its terms and components as numpy arrays."""
    shear = case.routine.material.shear

    def run() -> FloatArray:
        steps, stress = _steps(case)
        h = np.zeros((6, shear.times.size))
        for k in range(case.n):
            r = case.dxi[k] / shear.times
            h = np.exp(-r) * h + np.outer(steps[k], -np.expm1(-r) / r * (2.0 * shear.moduli))
            stress[k] += h.sum(axis=1)
        return stress

    return run


def filtered(case: Case) -> Engine:
    """One recursive filter a term and a component; needs increments of one length at one temperature."""
    shear = case.routine.material.shear
    if np.ptp(case.dxi) > 0.0:
        raise ValueError("a filter of constant coefficients needs equal increments")

    def run() -> FloatArray:
        steps, stress = _steps(case)
        r = case.dxi[0] / shear.times
        decay, gain = np.exp(-r), -np.expm1(-r) / r * (2.0 * shear.moduli)
        for d, g in zip(decay.tolist(), gain.tolist(), strict=True):
            stress += lfilter([g], [1.0, -d], steps, axis=0)
        return stress

    return run


def convolution(case: Case) -> Engine:
    """The hereditary integral as a sum over all earlier increments: work grows with their square."""
    shear = case.routine.material.shear

    def run() -> FloatArray:
        steps, stress = _steps(case)
        with np.errstate(under="ignore"):
            r = case.dxi[:, np.newaxis] / shear.times
            gain = -np.expm1(-r) / r * (2.0 * shear.moduli)
            for k in range(case.n):
                # summed from here back: a difference of two ends loses the short ones
                since = np.concatenate([[0.0], np.cumsum(case.dxi[k:0:-1])])
                modulus = (np.exp(-np.divide.outer(since, shear.times)) * gain[k::-1]).sum(axis=1)
                stress[k] += modulus @ steps[k::-1]
        return stress

    return run


def integrated(case: Case, tolerance: float) -> Engine:
    """Implicit solver of scipy on the rate equations of every term and component, from increment to increment."""
    shear = case.routine.material.shear
    terms = shear.times.size

    def run() -> FloatArray:
        steps, stress = _steps(case)
        scale = 2.0 * shear.instantaneous * float(np.abs(case.block.targets).max())
        state = np.zeros(6 * terms)
        rate = np.tile(1.0 / shear.times, 6)
        for k in range(case.n):
            source = np.outer(steps[k], 2.0 * shear.moduli).ravel() / case.dxi[k]
            solved = solve_ivp(
                lambda _, h, source=source: source - rate * h,
                (0.0, float(case.dxi[k])),
                state,
                method="BDF",
                jac=np.diag(-rate),
                rtol=tolerance,
                atol=tolerance * scale,
                t_eval=[float(case.dxi[k])],
            )
            state = solved.y[:, -1]
            stress[k] += state.reshape(6, terms).sum(axis=1)
        return stress

    return run
