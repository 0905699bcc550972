"""The standard set of paths, made from what a card says about the service of its part."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from drivers.path import MODES, Cycle, Path, Segment
from matlib.card import Card
from matlib.errors import ShiftRangeError
from matlib.material import Material
from matlib.tensors import mandel_from_strain, mandel_from_stress

__all__ = ["Window", "battery", "card_window", "paths_window"]

STRAIN = 0.01
"""Strain of every battery path: small, and linear response makes its size irrelevant."""

SHORTEST, LONGEST = 1e-9, 1e9  # s
ABOVE_POLE = 15.0  # K
WIDTH = 40.0  # K
DWELL = 160
RAMP = 120


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """Temperatures [K] and times [s] that a set of paths covers, ends included.

    Parameters
    ----------
    temperature, time : tuple of float
        Lowest and highest.
    source : str
        Where the window comes from, in words.
    """

    temperature: tuple[float, float]
    time: tuple[float, float]
    source: str

    @property
    def middle_temperature(self) -> float:
        """Half-way temperature [K]."""
        return 0.5 * (self.temperature[0] + self.temperature[1])

    def time_at(self, fraction: float) -> float:
        """Time at a fraction of the logarithmic window [s]."""
        low, high = (math.log(t) for t in self.time)
        return math.exp(low + fraction * (high - low))


def card_window(card: Card, material: Material) -> Window:
    """Window of a card: its service where stated, else its measured range and relaxation times.

    Parameters
    ----------
    card : Card
    material : Material
        Of the same card.

    Returns
    -------
    Window
    """
    if card.service_temperature is not None and card.service_time is not None:
        low, high = card.service_time
        return Window(
            temperature=card.service_temperature,
            time=(min(max(low, SHORTEST), LONGEST), min(max(high, SHORTEST), LONGEST)),
            source="service window of the card",
        )
    relaxing = np.concatenate([material.shear.times, material.bulk.times, [] if material.shear.times.size else [1.0]])
    time = (max(float(relaxing.min()) * 0.1, SHORTEST), min(float(relaxing.max()) * 10.0, LONGEST))
    if card.limits.measured is not None:
        unit = card.temperature_unit
        low, high = (unit.to_si(T) for T in card.limits.measured)
        return Window(temperature=(low, high), time=time, source="measured range and relaxation times of the card")
    T_ref, pole = material.shift.T_ref, material.shift.pole
    low = T_ref - WIDTH / 2 if pole is None else max(T_ref - WIDTH / 2, min(pole + ABOVE_POLE, T_ref))
    try:
        material.shift.ln_shift([low, T_ref + WIDTH / 2])
    except ShiftRangeError:
        return Window(temperature=(T_ref, T_ref), time=time, source="T_ref and relaxation times of the card")
    return Window(
        temperature=(low, T_ref + WIDTH / 2), time=time, source="T_ref +- 20 K and relaxation times of the card"
    )


def paths_window(paths: Sequence[Path]) -> Window:
    """Window that paths cover: their temperatures, and times from a thousandth of their shortest segment to their longest run."""
    ranges = [path.temperature_range for path in paths]
    durations = [float(d) for path in paths for s in path.segments for d in s.durations if d > 0.0] or [1.0]
    shortest, longest = 1e-3 * min(durations), max(*durations, *(path.duration for path in paths))
    return Window(
        temperature=(min(low for low, _ in ranges), max(high for _, high in ranges)),
        time=(min(max(shortest, SHORTEST), LONGEST), min(max(longest, SHORTEST), LONGEST)),
        source="the paths given",
    )


def _segment(
    label: str,
    duration: float,
    *,
    mode: str,
    strain: float | None = None,
    stress: float | None = None,
    temperature: float | None = None,
    increments: int = RAMP,
    spacing: str = "even",
) -> Segment:
    """One straight segment of a named mode; what is not given is held."""
    driven, free = list(MODES[mode].driven), list(MODES[mode].free)
    row, controlled, held = np.zeros(6), np.zeros(6, dtype=np.bool_), np.zeros(6, dtype=np.bool_)
    controlled[free] = True
    if stress is not None:
        row[driven], controlled[driven] = stress, True
    elif strain is not None:
        row[driven] = strain
    else:
        held[driven] = True
    return Segment(
        label=label,
        durations=np.array([duration]),
        temperatures=None if temperature is None else np.array([temperature]),
        targets=(mandel_from_strain(row) if stress is None else mandel_from_stress(row))[np.newaxis],
        stress_controlled=controlled,
        held=held,
        increments=increments,
        spacing=spacing,
    )


def _path(name: str, mode: str, T: float, *parts: Segment | Cycle) -> Path:
    return Path(name=name, mode=MODES[mode], start_temperature=T, parts=parts)


def _relaxation(mode: str, T: float, longest: float, what: str) -> Path:
    step = _segment("step", 0.0, mode=mode, strain=STRAIN, increments=1)
    dwell = _segment("dwell", longest, mode=mode, increments=DWELL, spacing="log")
    return _path(f"{what}, {_degrees(T)}", mode, T, step, dwell)


def _degrees(T: float) -> str:
    return f"{round(T - 273.15, 2):g} degC"


def battery(material: Material, window: Window) -> tuple[Path, ...]:
    """Relaxation, creep, pulls, thermal jump, thermal cycle and clamped cooling over a window.

    Parameters
    ----------
    material : Material
        Sets the size of the creep stress only.
    window : Window

    Returns
    -------
    paths : tuple of Path
        Increments are fine enough to drive with; an exact solution needs none.
    """
    T_low, T_high = window.temperature
    T_mid, longest = window.middle_temperature, window.time[1]
    temperatures = dict.fromkeys((T_low, T_mid, T_high))
    uniaxial = "uniaxial stress"
    paths = [_relaxation(uniaxial, T, longest, "relaxation") for T in temperatures]
    paths.append(_relaxation("simple shear", T_mid, longest, "shear relaxation"))
    paths.append(_relaxation("uniaxial strain", T_mid, longest, "confined relaxation"))

    stress = 3.0 * material.shear.instantaneous * STRAIN / 10.0
    for T in dict.fromkeys((T_mid, T_high)):
        load = _segment("load", 0.0, mode=uniaxial, stress=stress, increments=1)
        creep = _segment("dwell", longest, mode=uniaxial, stress=stress, increments=DWELL, spacing="log")
        paths.append(_path(f"creep, {_degrees(T)}", uniaxial, T, load, creep))

    for share in (0.2, 0.5, 0.8):
        duration = window.time_at(share)
        for T in temperatures:
            pull = _segment("pull", duration, mode=uniaxial, strain=STRAIN)
            paths.append(_path(f"pull of {duration:.2g} s, {_degrees(T)}", uniaxial, T, pull))
    if T_low < T_high:
        paths += _thermal(window)
    return tuple(paths)


def _thermal(window: Window) -> list[Path]:
    """The paths on which temperature changes."""
    (T_low, T_high), mode = window.temperature, "uniaxial stress"
    T_mid, pause = window.middle_temperature, window.time_at(0.5)
    step = _segment("step", 0.0, mode=mode, strain=STRAIN, increments=1)

    def dwell(label: str) -> Segment:
        return _segment(label, pause, mode=mode, increments=DWELL, spacing="log")

    def ramp(label: str, T: float) -> Segment:
        return _segment(label, pause, mode=mode, temperature=T)

    def jump(label: str, T: float) -> Segment:
        return _segment(label, 0.0, mode=mode, temperature=T, increments=1)

    thermal_jump = _path(
        "thermal jump", mode, T_mid,
        step, dwell("before"), jump("heat", T_high), dwell("hot"), jump("cool", T_low), dwell("cold"),
    )  # fmt: skip
    cycle = Cycle(repeat=3, segments=(ramp("heat", T_high), ramp("cool", T_low)))
    thermal_cycle = _path("thermal cycle", mode, T_mid, step, cycle)
    cooling = _path("clamped cooling", mode, T_high, step, ramp("cool", T_low), dwell("cold"))
    return [thermal_jump, thermal_cycle, cooling]
