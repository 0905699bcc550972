"""A load path: what strain, stress and temperature do over time at one material point."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from matlib.arrays import BoolArray, FloatArray, frozen, require_positive
from matlib.errors import ParameterError, UnknownNameError
from matlib.routine import Block

__all__ = ["MODES", "Cycle", "Mode", "Path", "Segment", "fractions", "segment_blocks"]

BLOCK_LIMIT = 4096
"""Increments that one block holds at most; bounds the memory of a run."""

LOG_SPAN = 1e6
"""With spacing "log", how many times larger increments get over a segment (in the limit of many)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Mode:
    """A named loading mode: which components are driven together, and which are free of stress.

    Parameters
    ----------
    name : str
    driven : tuple of int
        Components (0 to 5, order 11 22 33 23 13 12) that follow the one given strain or stress.
    free : tuple of int
        Components whose stress stays zero; all others keep zero strain.
    """

    name: str
    driven: tuple[int, ...]
    free: tuple[int, ...] = ()


MODES: dict[str, Mode] = {
    mode.name: mode
    for mode in (
        Mode(name="uniaxial stress", driven=(0,), free=(1, 2)),
        Mode(name="uniaxial strain", driven=(0,)),
        Mode(name="equibiaxial stress", driven=(0, 1), free=(2,)),
        Mode(name="plane strain tension", driven=(0,), free=(2,)),
        Mode(name="simple shear", driven=(5,)),
        Mode(name="hydrostatic", driven=(0, 1, 2)),
        Mode(name="components", driven=()),
    )
}


def find_mode(name: str) -> Mode:
    """Look a loading mode up by its name; `UnknownNameError` lists the known ones."""
    try:
        return MODES[name]
    except KeyError:
        raise UnknownNameError("mode", name, MODES) from None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Segment:
    """One stretch of a path under one kind of control, made of straight pieces (one, unless it is a measured record).

    Parameters
    ----------
    label : str
        Name in results.
    durations : array_like, shape (k,)
        Length of each piece [s]; zero is a jump.
    temperatures : array_like, shape (k,), or None
        Temperature at the end of each piece [K]; None holds it.
    targets : array_like, shape (k, 6)
        Value of each component at the end of each piece, Mandel form: a stress [Pa] where `stress_controlled`, a strain
        elsewhere. Ignored where `held`.
    stress_controlled, held : array_like of bool, shape (6,)
        Which components follow a stress, and which keep the value that they have when the segment starts.
    increments : int
        Increments of each piece.
    spacing : {"even", "log"}
        Equal increments, or increments that grow.
    """

    label: str
    durations: FloatArray
    temperatures: FloatArray | None
    targets: FloatArray
    stress_controlled: BoolArray
    held: BoolArray
    increments: int = 100
    spacing: str = "even"

    def __post_init__(self) -> None:
        durations = frozen(np.atleast_1d(self.durations))
        if durations.size == 0 or not np.all(np.isfinite(durations)) or np.any(durations < 0.0):
            raise ParameterError("duration", "finite and >= 0 s", self.durations)
        targets = frozen(self.targets)
        if targets.shape != (durations.size, 6) or not np.all(np.isfinite(targets)):
            raise ParameterError("targets", f"finite, of shape ({durations.size}, 6)", targets.tolist())
        if self.temperatures is not None:
            temperatures = frozen(np.atleast_1d(self.temperatures))
            if temperatures.shape != durations.shape or not np.all(temperatures > 0.0):
                raise ParameterError("temperature", "> 0 K at the end of every piece", self.temperatures)
            object.__setattr__(self, "temperatures", temperatures)
        if self.increments < 1:
            raise ParameterError("increments", ">= 1", self.increments)
        if self.spacing not in ("even", "log"):
            raise UnknownNameError("spacing", self.spacing, ("even", "log"))
        object.__setattr__(self, "durations", durations)
        object.__setattr__(self, "targets", targets)
        for name in ("stress_controlled", "held"):
            mask = np.array(getattr(self, name), dtype=np.bool_)
            mask.setflags(write=False)
            object.__setattr__(self, name, mask)

    @property
    def duration(self) -> float:
        """Length of the whole segment [s]."""
        return float(np.sum(self.durations))

    @property
    def increment_count(self) -> int:
        """Increments of the whole segment; a jump takes one."""
        jumps = int(np.count_nonzero(self.durations == 0.0))
        return jumps + (self.durations.size - jumps) * self.increments


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Cycle:
    """Segments that are run several times in turn.

    Parameters
    ----------
    repeat : int
        How often, ``>= 1``.
    segments : tuple of Segment
    """

    repeat: int
    segments: tuple[Segment, ...]

    def __post_init__(self) -> None:
        if self.repeat < 1:
            raise ParameterError("repeat", ">= 1", self.repeat)
        if not self.segments:
            raise ParameterError("segments", "at least one segment", "none")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Path:
    """A load path.

    Parameters
    ----------
    name : str
    mode : Mode
        Kind of loading, for information and for exact solutions; the segments carry the control itself.
    start_temperature : float
        Temperature at the start [K], where stress and strain are zero.
    parts : tuple of Segment or Cycle

    Examples
    --------
    >>> pull = Segment(label="pull", durations=[10.0], temperatures=None, targets=[[0.01, 0, 0, 0, 0, 0]],
    ...                stress_controlled=[False] * 6, held=[False] * 6, increments=5)
    >>> path = Path(name="p", mode=MODES["uniaxial strain"], start_temperature=293.15,
    ...             parts=(Cycle(repeat=3, segments=(pull,)),))
    >>> path.increment_count, [label for _, label, _ in path.unrolled()]
    (15, ['pull (1)', 'pull (2)', 'pull (3)'])
    """

    name: str
    mode: Mode
    start_temperature: float
    parts: tuple[Segment | Cycle, ...]

    def __post_init__(self) -> None:
        require_positive("start_temperature", self.start_temperature, "K")
        if not self.parts:
            raise ParameterError("parts", "at least one segment", "none")

    def unrolled(self) -> Iterator[tuple[int, str, Segment]]:
        """Each segment in the order in which it runs: its number among the distinct ones, its label, itself.

        Inside a cycle the label carries the round in parentheses.
        """
        first = 0
        for part in self.parts:
            if isinstance(part, Segment):
                yield first, part.label, part
                first += 1
                continue
            for turn in range(1, part.repeat + 1):
                for offset, segment in enumerate(part.segments):
                    yield first + offset, f"{segment.label} ({turn})", segment
            first += len(part.segments)

    @property
    def segments(self) -> tuple[Segment, ...]:
        """The distinct segments, in file order."""
        return tuple(s for part in self.parts for s in ((part,) if isinstance(part, Segment) else part.segments))

    @property
    def increment_count(self) -> int:
        """Increments of the whole run, cycles counted."""
        return sum(times * segment.increment_count for times, segment in self._counted())

    @property
    def segment_count(self) -> int:
        """Segments of the whole run, cycles counted."""
        return sum(times for times, _ in self._counted())

    @property
    def duration(self) -> float:
        """Length of the whole run [s], cycles counted."""
        return math.fsum(times * segment.duration for times, segment in self._counted())

    def _counted(self) -> Iterator[tuple[int, Segment]]:
        """Each distinct segment, and how often it runs."""
        for part in self.parts:
            if isinstance(part, Segment):
                yield 1, part
            else:
                yield from ((part.repeat, segment) for segment in part.segments)

    @property
    def temperature_range(self) -> tuple[float, float]:
        """Lowest and highest temperature [K]."""
        ends = [s.temperatures for s in self.segments if s.temperatures is not None]
        every = np.concatenate([[self.start_temperature], *ends])
        return float(every.min()), float(every.max())

    def with_increments(self, counts: int | tuple[int, ...]) -> Path:
        """Same path, other increments: one count for every segment, or one for each distinct segment."""
        given = (counts,) * len(self.segments) if isinstance(counts, int) else counts
        if len(given) != len(self.segments):
            raise ParameterError("counts", f"one for each of {len(self.segments)} segments", given)
        supply = iter(given)

        def changed(segment: Segment) -> Segment:
            return dataclasses.replace(segment, increments=next(supply))

        parts = tuple(
            changed(part)
            if isinstance(part, Segment)
            else dataclasses.replace(part, segments=tuple(changed(s) for s in part.segments))
            for part in self.parts
        )
        return dataclasses.replace(self, parts=parts)

    def refined(self, factor: int) -> Path:
        """Same path with `factor` times as many increments in every segment."""
        return self.with_increments(tuple(factor * s.increments for s in self.segments))


def fractions(count: int, spacing: str, start: int, stop: int) -> tuple[FloatArray, FloatArray]:
    """Where increments `start` to `stop` of a piece end, and how long they are, as fractions of the piece.

    Parameters
    ----------
    count : int
        Increments of the whole piece.
    spacing : {"even", "log"}
    start, stop : int
        Half-open range of increments.

    Returns
    -------
    ends, lengths : ndarray, shape (stop - start,)

    Notes
    -----
    "log" maps even fractions `x` to ``(S**x - 1)/(S - 1)`` with ``S = LOG_SPAN``: one smooth map, whatever the count,
    so that doubling the count halves every increment and orders of convergence can be observed.

    Examples
    --------
    >>> fractions(4, "even", 0, 4)[0].tolist()
    [0.25, 0.5, 0.75, 1.0]
    """
    k = np.arange(start, stop, dtype=np.float64)
    if spacing == "even":
        return (k + 1.0) / count, np.full(k.size, 1.0 / count)
    rate = math.log(LOG_SPAN)
    whole = math.expm1(rate)
    ends = np.expm1((k + 1.0) / count * rate) / whole
    lengths = np.exp(k / count * rate) * math.expm1(rate / count) / whole
    ends[k + 1.0 == count] = 1.0
    return ends, lengths


def segment_blocks(
    segment: Segment, time: float, temperature: float, values: FloatArray, limit: int = BLOCK_LIMIT
) -> Iterator[Block]:
    """Cut a segment into blocks of increments.

    Parameters
    ----------
    segment : Segment
    time, temperature : float
        At the start of the segment [s], [K].
    values : ndarray, shape (6,)
        What each component is at the start: stress where the segment controls stress, strain elsewhere (Mandel).
    limit : int
        Increments in a block at most.

    Yields
    ------
    Block
        Whose temperature starts where the one before it ended.
    """
    targets = np.where(segment.held, values, segment.targets)
    T_ends = segment.temperatures if segment.temperatures is not None else np.full(len(targets), temperature)
    pending: list[tuple[FloatArray, FloatArray, FloatArray, FloatArray]] = []
    size, T_block, time_block = 0, temperature, time
    last = len(targets) - 1
    for piece, (duration, T_end, target) in enumerate(zip(segment.durations, T_ends, targets, strict=True)):
        count = segment.increments if duration > 0.0 else 1
        for start in range(0, count, limit):
            stop = min(start + limit, count)
            ends, lengths = fractions(count, segment.spacing, start, stop)
            ending = ends[:, np.newaxis]
            pending.append(
                (
                    time + ends * duration,
                    lengths * duration,
                    np.where(ends < 1.0, temperature + ends * (T_end - temperature), T_end),
                    np.where(ending < 1.0, values + ending * (target - values), target),
                )
            )
            size += stop - start
            if size >= limit or (piece == last and stop == count):
                times, durations, T, rows = (np.concatenate(column) for column in zip(*pending, strict=True))
                yield Block(
                    time=np.concatenate([[time_block], times[:-1]]),
                    time_end=times,
                    duration=durations,
                    temperature=np.concatenate([[T_block], T]),
                    targets=rows,
                    stress_controlled=segment.stress_controlled,
                )
                pending, size, T_block, time_block = [], 0, float(T[-1]), float(times[-1])
        time, temperature, values = time + float(duration), float(T_end), target
