"""The response of one run, and its CSV form."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from matlib.arrays import BoolArray, FloatArray
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS, strain_from_mandel, stress_from_mandel
from matlib.units import STRESS, TEMPERATURE, TIME, Unit

__all__ = ["History", "csv_text"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class History:
    """The response at chosen increment ends, the start included.

    Parameters
    ----------
    segment : tuple of str, length n
        Label of the segment that each row ends an increment of; "start" for the first row.
    time, temperature : ndarray, shape (n,)
        [s], [K].
    reduced_time : ndarray, shape (n,), or None
        [s at T_ref]; None where the routine does not tell its clock.
    strain, stress : ndarray, shape (n, 6)
        Mandel form [-], [Pa].
    bound : ndarray, shape (n,), or None
        Guaranteed half-width on any stress component of the row [Pa]; None where the rows are not a reference solution.
    peak_stress : float
        Largest magnitude of any stress component over all increments, kept or not [Pa].
    ends : ndarray of bool, shape (n,), or None
        Which rows end a segment, the start among them; None where rows are told apart by their labels alone.
    """

    segment: tuple[str, ...]
    time: FloatArray
    temperature: FloatArray
    reduced_time: FloatArray | None
    strain: FloatArray
    stress: FloatArray
    peak_stress: float
    bound: FloatArray | None = None
    ends: BoolArray | None = None

    def __len__(self) -> int:
        return len(self.segment)

    def taken(self, rows: ArrayLike) -> History:
        """The history at some rows only; `peak_stress` stays that of the whole run."""
        index = np.asarray(rows, dtype=np.int64)
        return replace(
            self,
            segment=tuple(self.segment[k] for k in index),
            time=self.time[index],
            temperature=self.temperature[index],
            reduced_time=None if self.reduced_time is None else self.reduced_time[index],
            strain=self.strain[index],
            stress=self.stress[index],
            bound=None if self.bound is None else self.bound[index],
            ends=None if self.ends is None else self.ends[index],
        )

    @property
    def strain_components(self) -> FloatArray:
        """Strains in the order e11 e22 e33 g23 g13 g12 (engineering shear), shape (n, 6)."""
        return strain_from_mandel(self.strain)

    @property
    def stress_components(self) -> FloatArray:
        """Stresses in the order s11 s22 s33 s23 s13 s12 [Pa], shape (n, 6)."""
        return stress_from_mandel(self.stress)

    def kept(self, keep: str | int) -> History:
        """Every row ("all"), those that end a segment ("ends"), or every n-th and those; the start always."""
        if keep == "all":
            return self
        ends = self._ends()
        if keep == "ends":
            return self.taken(ends)
        return self.taken(np.union1d(np.arange(0, len(self), int(keep)), ends))

    def at_segment_ends(self) -> History:
        """Only the rows that end a segment, and the start."""
        return self.taken(self._ends())

    def _ends(self) -> NDArray[np.int64]:
        if self.ends is not None:
            return np.flatnonzero(self.ends)
        labels = self.segment
        return np.array([k for k in range(len(labels)) if labels[k : k + 1] != labels[k + 1 : k + 2]])


def csv_text(
    history: History,
    *,
    stress: Unit = STRESS["Pa"],
    time: Unit = TIME["s"],
    temperature: Unit = TEMPERATURE["K"],
) -> str:
    """A history as CSV: a header row with units in brackets, then a row an increment end.

    Parameters
    ----------
    history : History
    stress, time, temperature : Unit, optional
        Units to write.

    Returns
    -------
    text : str
        Numbers in the shortest form that reads back to the same double. A reduced time that is not known is left empty.
    """
    header = ["segment", f"time [{time.name}]", f"temperature [{temperature.name}]", f"reduced_time [{time.name}]"]
    header += [f"{name} [-]" for name in STRAIN_COMPONENTS]
    header += [f"{name} [{stress.name}]" for name in STRESS_COMPONENTS]
    columns = [time.from_si(history.time), temperature.from_si(history.temperature)]
    columns += [*history.strain_components.T, *stress.from_si(history.stress_components).T]
    if history.bound is not None:
        header.append(f"bound [{stress.name}]")
        columns.append(stress.from_si(history.bound))
    numbers = [[repr(value) for value in row] for row in np.stack(columns, axis=1).tolist()]
    if history.reduced_time is None:
        clock = [""] * len(history)
    else:
        clock = [repr(value) for value in time.from_si(history.reduced_time).tolist()]
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(header)
    for label, row, xi in zip(history.segment, numbers, clock, strict=True):
        writer.writerow([label, *row[:2], xi, *row[2:]])
    return buffer.getvalue()
