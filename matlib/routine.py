"""The contract of a stress-update routine: an increment and an explicit memory in, an update out."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import NamedTuple

from numpy.typing import ArrayLike

from matlib.arrays import BoolArray, FloatArray

__all__ = ["Block", "BlockResponse", "BlockRoutine", "Increment", "Routine", "Update"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Increment:
    """One step at one material point; temperature and strain move straight from start to end.

    Parameters
    ----------
    time : float
        Time at the start [s].
    duration : float
        Length of the increment [s], ``>= 0``; zero is a jump. Given on its own, because the difference of two late
        times loses a short increment.
    temperature : tuple of float
        Temperature at the start and at the end [K].
    strain : tuple of ndarray, each shape (6,)
        Strain at the start and at the end, Mandel form [-].
    """

    time: float
    duration: float
    temperature: tuple[float, float]
    strain: tuple[FloatArray, FloatArray]


class Update(NamedTuple):
    """What an increment leads to.

    Parameters
    ----------
    stress : ndarray, shape (6,)
        Stress at the end, Mandel form [Pa].
    tangent : ndarray, shape (6, 6)
        Derivative of `stress` with respect to the strain at the end [Pa].
    memory : ndarray, shape (memory_size,)
        What the point remembers at the end.
    """

    stress: FloatArray
    tangent: FloatArray
    memory: FloatArray


class Routine(ABC):
    """Anything that does the stress update: ours, yours in Python, yours compiled.

    A routine keeps nothing of its own between calls, and changes none of its arguments: an increment that is taken only
    to look, or is taken back, costs nothing.
    """

    @property
    @abstractmethod
    def memory_size(self) -> int:
        """Numbers that a point remembers; all zero at the start of a path, where stress is zero as well."""

    @abstractmethod
    def update(self, increment: Increment, memory: FloatArray) -> Update:
        """Stress, tangent and new memory at the end of `increment`."""

    def reduced_time(self, duration: ArrayLike, T_start: ArrayLike, T_end: ArrayLike) -> FloatArray | None:
        """Reduced time of increments [s at T_ref], by a routine that tells its clock; None from one that does not."""
        return None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Block:
    """A run of increments under one kind of control.

    Parameters
    ----------
    time, time_end : ndarray, shape (n,)
        Time at the start and at the end of each increment [s]; never runs backwards, not even by a rounding.
    duration : ndarray, shape (n,)
        Lengths [s], ``>= 0``.
    temperature : ndarray, shape (n + 1,)
        Temperature at the increment ends, the first start included [K].
    targets : ndarray, shape (n, 6)
        What each component, Mandel form, is at the end of each increment: a stress [Pa] where `stress_controlled`, a
        strain [-] elsewhere.
    stress_controlled : ndarray of bool, shape (6,)
        Which components follow a stress.
    """

    time: FloatArray
    time_end: FloatArray
    duration: FloatArray
    temperature: FloatArray
    targets: FloatArray
    stress_controlled: BoolArray


class BlockResponse(NamedTuple):
    """The response at the increment ends of a `Block`.

    Parameters
    ----------
    strain, stress : ndarray, shape (n, 6)
        Mandel form [-], [Pa].
    memory : ndarray, shape (memory_size,)
        What the point remembers at the end.
    reduced_time : ndarray, shape (n,), or None
        That of each increment [s at T_ref], where the routine says.
    """

    strain: FloatArray
    stress: FloatArray
    memory: FloatArray
    reduced_time: FloatArray | None = None


class BlockRoutine(Routine):
    """A routine with a fast lane: it takes many increments in one call, and solves mixed control itself."""

    @abstractmethod
    def run(self, block: Block, strain: FloatArray, memory: FloatArray) -> BlockResponse:
        """Take all increments of `block` from the strain and memory at its start; neither argument is changed."""
