"""Do two cards say the same thing?"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from matlib.errors import ParameterError, ShiftRangeError
from matlib.material import Material
from matlib.shift import ShiftLaw
from matlib.shift.conversion import largest_difference_decades
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["Comparison", "PathComparison", "Same", "ShiftDifference", "Where", "compare"]

Same = Literal["identical", "within tolerance", "different"]
EPS = float(np.finfo(np.float64).eps)


@dataclass(frozen=True, slots=True, kw_only=True)
class Where:
    """Where on a path something happens: segment label, time [s], temperature [K]."""

    segment: str
    time: float
    temperature: float


@dataclass(frozen=True, slots=True, kw_only=True)
class ShiftDifference:
    """Largest difference of two shift laws over a window.

    Both are taken as 1 at one temperature: the first one's T_ref, or the end of the window that is nearest to it.

    Parameters
    ----------
    decades : float or None
        In log10 a_T; None where one law has no answer in the window.
    temperature : float or None
        Where [K].
    reason : str
        Why there is no number.
    """

    decades: float | None
    temperature: float | None
    reason: str = ""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PathComparison:
    """Two responses to one path.

    Parameters
    ----------
    path : Path
    quantity : {"stress", "strain"}
        Which of the two differs more, each relative to its own peak.
    component : int
        Which component differs most.
    largest_difference : float or None
        Of that component [Pa] or [-]; None where one card has no response.
    relative : float or None
        `largest_difference` as a fraction of the peak of the first response.
    rounding : float
        What rounding alone can make of two equal cards, as such a fraction.
    at : Where or None
    holds : bool
        Whether `relative` is within the tolerance.
    first, second : History or None
    reason : str
        Why there is no response.
    """

    path: Path
    quantity: str
    component: int
    largest_difference: float | None
    relative: float | None
    rounding: float
    at: Where | None
    holds: bool
    first: History | None
    second: History | None
    reason: str = ""

    @property
    def identical(self) -> bool:
        """Whether nothing but rounding lies between the two responses."""
        return self.relative is not None and self.relative <= self.rounding


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Comparison:
    """Verdict over all paths."""

    same: Same
    tolerance: float
    shift: ShiftDifference
    paths: tuple[PathComparison, ...]

    @property
    def holds(self) -> bool:
        """Whether the cards say the same thing within the tolerance."""
        return self.same != "different"

    @property
    def worst(self) -> PathComparison:
        """The path that differs most; one without a response before all others."""
        return max(self.paths, key=lambda p: float("inf") if p.relative is None else p.relative)


def _conditioning(law: ShiftLaw, T_low: float, T_high: float) -> float:
    r"""How much a rounding of temperatures and constants is magnified in :math:`\ln a_T`."""
    T = np.linspace(T_low, T_high, 65) if T_high > T_low else np.array([T_low])
    ln_a = law.ln_shift(T)
    slope = np.abs(np.gradient(ln_a, T)) if T.size > 1 else np.zeros(1)
    return float((np.abs(ln_a) + T * slope).max())


def rounding_bound(material: Material, path: Path, history: History) -> float:
    """Relative difference that rounding alone can make between equal cards in different forms.

    Parameters
    ----------
    material : Material
    path : Path
    history : History
        Response to `path`.

    Returns
    -------
    bound : float
        Relative to the peak stress.

    Notes
    -----
    One rounding an increment, and those of the shift factor magnified by its conditioning, on a stress as large as the
    instantaneous modulus times the largest strain; the peak stress may be much smaller than that.
    """
    T_low, T_high = path.temperature_range
    cond = _conditioning(material.shift, T_low, T_high)
    stiffness = material.bulk.instantaneous + 4.0 / 3.0 * material.shear.instantaneous
    strain = float(np.abs(history.strain).max()) + 3.0 * abs(material.expansion) * (T_high - T_low)
    peak = history.peak_stress
    magnified = max(1.0, stiffness * strain / peak) if peak > 0.0 else 1.0
    return 4.0 * EPS * (path.increment_count + 8.0 * cond) * magnified


def _largest(first: History, second: History) -> tuple[str, int, int, float, float]:
    """Quantity, row, component, difference and relative difference where two responses differ most."""
    best = ("stress", 0, 0, 0.0, 0.0)
    for quantity, a, b in (
        ("stress", first.stress_components, second.stress_components),
        ("strain", first.strain_components, second.strain_components),
    ):
        gap = np.abs(a - b)
        peak = float(np.abs(a).max()) or float(np.abs(b).max())
        if peak == 0.0:
            continue
        row, component = (int(i) for i in np.unravel_index(int(gap.argmax()), gap.shape))
        relative = float(gap[row, component]) / peak
        if relative > best[4]:
            best = (quantity, row, component, float(gap[row, component]), relative)
    return best


def _compare_path(a: Material, b: Material, path: Path, tolerance: float) -> PathComparison:
    responses: list[History | None] = []
    reasons = []
    for which, material in (("first", a), ("second", b)):
        try:
            responses.append(drive(LinearViscoelastic(material=material), path))
        except ShiftRangeError as error:
            responses.append(None)
            reasons.append(f"{which} card: {error}")
    first, second = responses
    if first is None or second is None:
        return PathComparison(
            path=path, quantity="stress", component=0, largest_difference=None, relative=None, rounding=0.0, at=None,
            holds=False, first=first, second=second, reason="; ".join(reasons),
        )  # fmt: skip
    quantity, row, component, difference, relative = _largest(first, second)
    rounding = rounding_bound(a, path, first) + rounding_bound(b, path, second)
    return PathComparison(
        path=path,
        quantity=quantity,
        component=component,
        largest_difference=difference,
        relative=relative,
        rounding=rounding,
        at=Where(segment=first.segment[row], time=float(first.time[row]), temperature=float(first.temperature[row])),
        holds=relative <= max(tolerance, rounding),
        first=first,
        second=second,
    )


def compare(
    a: Material,
    b: Material,
    paths: Sequence[Path],
    *,
    tolerance: float,
    temperatures: tuple[float, float],
    progress: Callable[[int], None] | None = None,
) -> Comparison:
    """Compare the responses of two materials.

    Parameters
    ----------
    a, b : Material
    paths : sequence of Path
        At least one.
    tolerance : float
        Largest difference that passes, as a fraction of a path's peak stress (or of its peak strain, where strain is
        the response), ``>= 0``.
    temperatures : tuple of float
        Window for the comparison of the shift laws [K].
    progress : callable, optional
        Called with 1 after each path.

    Returns
    -------
    Comparison
    """
    if not 0.0 <= tolerance < np.inf:
        raise ParameterError("tolerance", "finite and >= 0", tolerance)
    if not paths:
        raise ParameterError("paths", "at least one path", "none")
    results = []
    for path in paths:
        results.append(_compare_path(a, b, path, tolerance))
        if progress is not None:
            progress(1)
    try:
        T_low, T_high = temperatures
        T_common = min(max(a.shift.T_ref, T_low), T_high)
        decades, at = largest_difference_decades(a.shift, b.shift, T_low, T_high, T_common=T_common)
        shift = ShiftDifference(decades=decades, temperature=at)
    except ShiftRangeError as error:
        shift = ShiftDifference(decades=None, temperature=None, reason=str(error))
    if all(result.identical for result in results):
        same: Same = "identical"
    elif all(result.holds for result in results):
        same = "within tolerance"
    else:
        same = "different"
    return Comparison(same=same, tolerance=tolerance, shift=shift, paths=tuple(results))
