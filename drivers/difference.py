"""How far two responses to one path are apart, and where."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from drivers.history import History
from drivers.path import Path, Segment
from matlib.arrays import FloatArray
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS

__all__ = ["Difference", "Where", "largest_difference", "relative_gaps", "shared_rows"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Where:
    """Where on a path something happens: segment label, time [s], temperature [K]."""

    segment: str
    time: float
    temperature: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Difference:
    """The largest difference of two responses.

    Parameters
    ----------
    quantity : {"stress", "strain"}
        Which of the two differs more, each relative to its own peak in the first response.
    component : str
        Such as ``s11`` or ``e22``.
    value : float
        The difference [Pa] or [-], ``>= 0``.
    relative : float
        `value` as a fraction of that peak.
    at : Where
    """

    quantity: str
    component: str
    value: float
    relative: float
    at: Where


def largest_difference(first: History, second: History, *, negligible_stress: float = 0.0) -> Difference:
    """Largest difference of two histories with the same rows.

    Parameters
    ----------
    first, second : History
        Of the same length; the first gives the peaks and the place.
    negligible_stress : float, optional
        A peak stress up to this is rounding, and not compared [Pa].

    Returns
    -------
    Difference
        Of stress, unless strain differs more; of size 0 at the start where nothing differs, infinite where a response is
        not a number.
    """
    start = Where(segment=first.segment[0], time=float(first.time[0]), temperature=float(first.temperature[0]))
    best = Difference(quantity="stress", component=STRESS_COMPONENTS[0], value=0.0, relative=0.0, at=start)
    for quantity, names, a, b, negligible in (
        ("stress", STRESS_COMPONENTS, first.stress_components, second.stress_components, negligible_stress),
        ("strain", STRAIN_COMPONENTS, first.strain_components, second.strain_components, 0.0),
    ):
        peak = _peak(a, negligible) or _peak(b, negligible)
        if peak == 0.0:
            continue
        gap: FloatArray = np.nan_to_num(np.abs(a - b), nan=math.inf, posinf=math.inf)
        row, component = (int(i) for i in np.unravel_index(int(gap.argmax()), gap.shape))
        value = float(gap[row, component])
        if value / peak > best.relative:
            best = Difference(
                quantity=quantity,
                component=names[component],
                value=value,
                relative=value / peak,
                at=Where(
                    segment=first.segment[row], time=float(first.time[row]), temperature=float(first.temperature[row])
                ),
            )
    return best


def _peak(values: FloatArray, negligible: float) -> float:
    """Largest magnitude, zero where negligible; what is not a number is left out."""
    peak = float(np.max(np.abs(values), initial=0.0, where=np.isfinite(values)))
    return peak if peak > negligible else 0.0


def relative_gaps(first: History, second: History, quantity: str) -> FloatArray:
    """Largest difference over the components, row by row.

    Parameters
    ----------
    first, second : History
        With the same rows.
    quantity : {"stress", "strain"}

    Returns
    -------
    gaps : ndarray, shape (n,)
        As a fraction of the peak of the first (of the second, where the first stays zero).
    """
    a, b = (h.stress_components if quantity == "stress" else h.strain_components for h in (first, second))
    peak = float(np.abs(a).max()) or float(np.abs(b).max()) or 1.0
    return np.asarray(np.abs(a - b).max(axis=1) / peak)


def shared_rows(path: Path, counts_a: tuple[int, ...], counts_b: tuple[int, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Rows where two runs of a path with different increments stand at the same time.

    Parameters
    ----------
    path : Path
    counts_a, counts_b : tuple of int
        Increments of each distinct segment, in the two runs.

    Returns
    -------
    rows_a, rows_b : ndarray of int
        Of equal length: the start, and per piece the ends of as many equal parts as divide both counts.

    Examples
    --------
    >>> from drivers.path import MODES
    >>> hold = Segment(label="hold", durations=[1.0], temperatures=None, targets=[[0] * 6],
    ...                stress_controlled=[False] * 6, held=[True] * 6)
    >>> path = Path(name="p", mode=MODES["uniaxial strain"], start_temperature=300.0, parts=(hold,))
    >>> [rows.tolist() for rows in shared_rows(path, (4,), (6,))]
    [[0, 2, 4], [0, 3, 6]]
    """
    parts = tuple(math.gcd(a, b) for a, b in zip(counts_a, counts_b, strict=True))
    return _rows(path, counts_a, parts), _rows(path, counts_b, parts)


def _rows(path: Path, counts: tuple[int, ...], parts: tuple[int, ...]) -> np.ndarray:
    local = [_rows_of(s, n, n // k) for s, n, k in zip(path.segments, counts, parts, strict=True)]
    lengths = [int(_piece_lengths(s, n).sum()) for s, n in zip(path.segments, counts, strict=True)]
    rows, offset = [np.zeros(1, dtype=np.int64)], 0
    for index, _, _ in path.unrolled():
        rows.append(offset + local[index])
        offset += lengths[index]
    return np.concatenate(rows)


def _piece_lengths(segment: Segment, count: int) -> np.ndarray:
    return np.where(segment.durations > 0.0, count, 1)


def _rows_of(segment: Segment, count: int, every: int) -> np.ndarray:
    """Every n-th increment end of each piece; the end of each jump."""
    lengths = _piece_lengths(segment, count)
    place = np.arange(1, int(lengths.sum()) + 1)
    inside = place - np.repeat(np.cumsum(lengths) - lengths, lengths)
    kept = (inside % every == 0) | np.repeat(segment.durations == 0.0, lengths)
    return place[kept]
