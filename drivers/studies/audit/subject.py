"""What is audited, and what a check says of it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from drivers.battery import Window, battery, card_window
from drivers.path import MODES, Path, Segment
from matlib.arrays import FloatArray
from matlib.card import Card
from matlib.material import Material
from matlib.routine import Increment, Routine, Update
from matlib.tensors import mandel_from_strain

__all__ = ["CheckResult", "Subject", "increment", "segment_path", "strain_path", "subject_of", "take"]

STRAIN = 0.01
EPS = float(np.finfo(np.float64).eps)
ROUNDING = 1e-11
"""Relative difference that rounding alone may make over a hundred increments of some tens of terms: 1e5 roundings at worst."""

SAFETY = 4.0
"""How far an error may exceed the one that a routine's own change under halved increments and its claimed order stand for."""

BLIND = Window(temperature=(283.15, 303.15), time=(1e-3, 1e3), source="assumed, since no card is given")


@dataclass(frozen=True, slots=True, kw_only=True)
class CheckResult:
    """What one check found.

    Parameters
    ----------
    id : str
    holds : bool
    measured : float or None
        None where nothing could be measured: the routine failed, or the check needs a card and there is none.
    limit : float or None
    message : str
        One sentence that a developer of the routine can act on.
    replay : str or None
        File with the increment that failed.
    """

    id: str
    holds: bool
    measured: float | None
    limit: float | None
    message: str
    replay: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Subject:
    """A routine and what is known of it.

    Parameters
    ----------
    routine : Routine
    material : Material or None
        What the routine is meant to be.
    order : float
        Order of convergence that it claims.
    window : Window
        Temperatures and times to exercise it over.
    quick : bool
        Fewer paths and increments.
    """

    routine: Routine
    material: Material | None
    order: float
    window: Window
    quick: bool = False

    @property
    def T(self) -> float:
        """A temperature in the middle of the window [K]."""
        return self.window.middle_temperature

    @property
    def duration(self) -> float:
        """A time at which the material relaxes at `T`, as far as is known [s]."""
        return self._real_time(lambda log_times: float(log_times.mean()), 0.5)

    @property
    def shortest(self) -> float:
        """The time at which the fastest term relaxes at `T`, as far as is known [s]."""
        return self._real_time(lambda log_times: float(log_times.min()), 0.2)

    def _real_time(self, of: Callable[[FloatArray], float], share: float) -> float:
        if self.material is None or self.material.shear.times.size == 0:
            return self.window.time_at(share)
        ln_t = of(np.log(self.material.shear.times)) + float(self.material.shift.ln_shift(self.T))
        return float(np.exp(np.clip(ln_t, -60.0, 60.0)))

    def paths(self) -> tuple[Path, ...]:
        """The battery; a part of it where the audit is quick."""
        if self.material is None:
            return ()
        every = battery(self.material, self.window)
        if not self.quick:
            return every
        wanted = ("confined", "thermal cycle", "clamped")
        return tuple(path for path in every if path.name.startswith(wanted))


def subject_of(routine: Routine, card: Card | None, *, order: float, quick: bool = False) -> Subject:
    """A routine with its card, its claim and a window."""
    if card is None:
        return Subject(routine=routine, material=None, order=order, window=BLIND, quick=quick)
    material = card.material()
    return Subject(routine=routine, material=material, order=order, window=card_window(card, material), quick=quick)


def increment(
    duration: float, T: tuple[float, float], start: FloatArray, end: FloatArray, time: float = 0.0
) -> Increment:
    """An increment between two strains (Mandel)."""
    return Increment(time=time, duration=duration, temperature=T, strain=(start, end))


def take(routine: Routine, increments: Sequence[Increment], memory: FloatArray | None = None) -> list[Update]:
    """Take increments one after the other, from the start of a path unless a memory is given."""
    carried = np.zeros(routine.memory_size) if memory is None else memory
    updates = []
    for one in increments:
        update = routine.update(one, carried)
        carried = update.memory
        updates.append(update)
    return updates


def segment_path(name: str, T: float, *segments: Segment) -> Path:
    """A path of strain-controlled segments."""
    return Path(name=name, mode=MODES["components"], start_temperature=T, parts=segments)


def strain_path(
    label: str,
    duration: float,
    strain: FloatArray,
    *,
    T: float | None = None,
    increments: int = 1,
    spacing: str = "even",
) -> Segment:
    """A segment that goes straight to a strain with the components e11 e22 e33 g23 g13 g12, all of them given."""
    return Segment(
        label=label,
        durations=np.array([duration]),
        temperatures=None if T is None else np.array([T]),
        targets=mandel_from_strain(strain)[np.newaxis],
        stress_controlled=np.zeros(6, dtype=np.bool_),
        held=np.zeros(6, dtype=np.bool_),
        increments=increments,
        spacing=spacing,
    )
