"""The built-in stress-update routine."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from matlib.arrays import FloatArray
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.packing import State, Terms, pack, pack_weights
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS, Recursion
from matlib.routine import Block, BlockResponse, BlockRoutine, Increment, Update
from matlib.shift.reduced_time import SHIFT_RULES, ShiftRule
from matlib.tensors import DEVIATORIC, IDENTITY, isotropic_stiffness

__all__ = ["LinearViscoelastic"]

# Beyond this ratio of reduced time to relaxation time every recursion stands at its limit; it only keeps r finite.
LARGEST_R = 1e300


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LinearViscoelastic(BlockRoutine):
    r"""Isotropic linear viscoelasticity at one point.

    .. math:: \sigma = \int 2 G(\xi-\xi')\, d e + \int K(\xi-\xi')\, (d\,\mathrm{tr}\,\varepsilon - 3 \alpha\, dT)\, I

    Parameters
    ----------
    material : Material
        What the card says.
    recursion : Recursion, optional
        How the integral is carried over an increment; ``exponential`` if left out.
    shift_rule : callable, optional
        How the reduced time of an increment is found; ``integrated`` (exact) if left out.

    Notes
    -----
    Memory: the mechanical volume strain, then the relaxing mean stress of each bulk term, then the relaxing deviatoric
    stress of each shear term, six numbers a component in turn. Stress is zero at the start of a path, whatever its
    temperature.

    Examples
    --------
    >>> from matlib.shift import NoShift
    >>> material = Material(
    ...     shear=PronySeries(equilibrium=1e6, moduli=[2e6], times=[5.0]),
    ...     bulk=PronySeries.elastic(5e6), shift=NoShift())
    >>> routine = LinearViscoelastic(material=material)
    >>> shear = np.array([0, 0, 0, 0, 0, 0.01])
    >>> jump = Increment(time=0.0, duration=0.0, temperature=(293.15, 293.15), strain=(np.zeros(6), shear))
    >>> float(routine.update(jump, np.zeros(routine.memory_size)).stress[5])  # 2 G0 e
    60000.0
    """

    material: Material
    recursion: Recursion = field(default_factory=lambda: RECURSIONS["exponential"])
    shift_rule: ShiftRule = field(default_factory=lambda: SHIFT_RULES["integrated"])
    _shear_terms: Terms = field(init=False, repr=False)
    _bulk_terms: Terms = field(init=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "_shear_terms", pack(self.material.shear, 2.0))
        object.__setattr__(self, "_bulk_terms", pack(self.material.bulk))

    @property
    def memory_size(self) -> int:
        """One number for the volume strain, one a bulk term, six a shear term."""
        return 1 + self.material.bulk.times.size + 6 * self.material.shear.times.size

    def reduced_time(self, duration: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray:
        """Reduced time of increments by the shift rule of this routine [s at T_ref]."""
        return self.shift_rule(self.material.shift, duration, T_start, T_end)

    def _weights(self, series: PronySeries, dxi: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Decay and gain of each term, shape (n, terms)."""
        with np.errstate(over="ignore", under="ignore"):
            r = np.minimum(dxi[:, np.newaxis] / series.times, LARGEST_R)
        return self.recursion.decay(r), self.recursion.gain(r)

    def update(self, increment: Increment, memory: FloatArray) -> Update:
        """Stress, tangent and new memory at the end of one increment.

        Raises
        ------
        ParameterError
            If `memory` has another length than `memory_size`, or the duration is negative or not finite.
        ShiftRangeError
            If the shift law has no answer at a temperature of the increment.
        """
        _require_shape("memory", memory, (self.memory_size,))
        if not 0.0 <= increment.duration < np.inf:
            raise ParameterError("duration", "finite and >= 0 s", increment.duration)
        shear, bulk = self.material.shear, self.material.bulk
        T_start, T_end = increment.temperature
        dxi = np.atleast_1d(self.reduced_time(increment.duration, T_start, T_end))
        shear_decay, shear_gain = (w[0] for w in self._weights(shear, dxi))
        bulk_decay, bulk_gain = (w[0] for w in self._weights(bulk, dxi))

        p, h = memory[1 : 1 + bulk.times.size], memory[1 + bulk.times.size :].reshape(6, -1)
        step = increment.strain[1] - increment.strain[0]
        mechanical = step @ IDENTITY - 3.0 * self.material.expansion * (T_end - T_start)
        theta_new = memory[0] + mechanical
        p_new = bulk_decay * p + bulk_gain * bulk.moduli * mechanical
        h_new = shear_decay * h + 2.0 * np.outer(DEVIATORIC @ step, shear_gain * shear.moduli)

        stress = (
            2.0 * shear.equilibrium * (DEVIATORIC @ increment.strain[1])
            + h_new.sum(axis=1)
            + (bulk.equilibrium * theta_new + p_new.sum()) * IDENTITY
        )
        tangent = isotropic_stiffness(
            shear.equilibrium + float(shear_gain @ shear.moduli), bulk.equilibrium + float(bulk_gain @ bulk.moduli)
        )
        return Update(stress, tangent, np.concatenate([[theta_new], p_new, h_new.ravel()]))

    def run(self, block: Block, strain: FloatArray, memory: FloatArray) -> BlockResponse:
        """Take all increments of a block in one compiled call; `update` and mixed control give the same, one by one.

        Raises
        ------
        ParameterError
            If an array has a shape that does not belong to the block or the material, or a duration is negative or not
            finite.
        ShiftRangeError
            If the shift law has no answer at a temperature of the block.

        Notes
        -----
        Where a recursion leaves no stiffness (a liquid, midpoint, an increment of very many relaxation times) and a
        stress is to be followed all the same, the response is not finite.
        """
        from matlib.compiling import announced
        from matlib.kernels import run_members

        shear, bulk = self.material.shear, self.material.bulk
        T, n = block.temperature, block.duration.size
        _require_shape("memory", memory, (self.memory_size,))
        _require_shape("strain", strain, (6,))
        _require_shape("stress_controlled", block.stress_controlled, (6,))
        _require_shape("targets", block.targets, (n, 6))
        _require_shape("temperature", T, (n + 1,))
        dxi = self.reduced_time(block.duration, T[:-1], T[1:])
        shear_terms, bulk_terms = self._shear_terms, self._bulk_terms
        if not self.recursion.form.compiled:
            shear_terms = pack_weights(shear_terms, *self._weights(shear, dxi))
            bulk_terms = pack_weights(bulk_terms, *self._weights(bulk, dxi))
        state = State.unpacked(strain, memory, shear.times.size, bulk.times.size)
        targets = np.require(block.targets, np.float64, ["C", "W"])
        strain_out = np.empty((n, 6)) if block.stress_controlled.any() else targets
        stress_out = np.empty((n + n % 2, 6))
        with np.errstate(over="ignore", under="ignore"), announced():
            run_members(
                self.recursion.form,
                np.require(dxi, np.float64, ["C", "W"])[np.newaxis],
                targets[np.newaxis],
                np.array(block.stress_controlled),
                3.0 * self.material.expansion * np.diff(T)[np.newaxis],
                shear_terms,
                bulk_terms,
                state,
                strain_out[np.newaxis],
                stress_out[np.newaxis],
            )
        return BlockResponse(strain_out, stress_out[:n], state.memory(shear.times.size, bulk.times.size), dxi)


def _require_shape(name: str, array: NDArray[np.generic], shape: tuple[int, ...]) -> None:
    """The kernel checks no bounds, so its caller does."""
    if array.shape != shape:
        raise ParameterError(name, f"of shape {shape}", array.shape)
