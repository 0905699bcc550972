"""Do two cards say the same thing?"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from drivers.difference import Difference, largest_difference
from drivers.history import History
from drivers.path import Path
from drivers.point import drive
from drivers.reference import DEFAULT_ACCURACY, Reference, solve
from matlib.errors import ParameterError, ShiftRangeError
from matlib.material import Material
from matlib.shift import ShiftLaw
from matlib.shift.conversion import largest_difference_decades
from matlib.viscoelastic import LinearViscoelastic

__all__ = ["Comparison", "PathComparison", "Same", "ShiftDifference", "compare"]

Same = Literal["identical", "within tolerance", "different"]
EPS = float(np.finfo(np.float64).eps)


ROWS = 48
"""Rows of each straight segment on which two responses are held against each other, whatever the path's own increments."""

MOST_ROWS = 20_000
"""Rows of a path with many segments, but for at least 4 of each segment."""

LARGEST_ROUNDING = 1e-6
"""What rounding may do to a card that is worth the name; a pole a millikelvin away comes near."""

LARGEST_RUN = 200_000
"""Rows of a path at most: a few minutes."""

TIGHTER, TIGHTEST = 0.02, 1e-10


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
    difference : Difference or None
        Where the responses differ most; None where one card has none.
    rounding : float
        What rounding alone can make of two equal cards, as a fraction of the peak.
    identical : bool
        Whether nothing but rounding lies between the two cards on this path.
    bound : float
        Half-width on `difference.relative`, of both reference solutions together; 0 where identical.
    estimated : bool
        Whether that half-width is an estimate.
    holds : bool
        Whether the difference is within the tolerance, the bound allowed for.
    first, second : History or None
    reason : str
        Why there is no response.
    """

    path: Path
    difference: Difference | None
    rounding: float
    identical: bool
    bound: float
    estimated: bool
    holds: bool
    first: History | None
    second: History | None
    reason: str = ""

    @property
    def relative(self) -> float | None:
        """Largest difference as a fraction of the peak, or None."""
        return None if self.difference is None else self.difference.relative


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Comparison:
    """Verdict over all paths.

    Parameters
    ----------
    same : Same
    tolerance : float
    shift : ShiftDifference
    paths : tuple of PathComparison
    basis : str
        What the responses are that differ, in words.
    judges_increments : bool
        Whether the increments of the paths, too, have a part in a difference.
    """

    same: Same
    tolerance: float
    shift: ShiftDifference
    paths: tuple[PathComparison, ...]
    basis: str = "reference solutions"
    judges_increments: bool = False

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
    T = np.unique(np.linspace(T_low, T_high, 65))  # fewer, where the ends are nearly equal
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
        Relative to the peak stress; 0 for a law so steep that rounding would excuse anything.

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
    share = 4.0 * EPS * (path.increment_count + 8.0 * cond)
    return share * magnified if share < LARGEST_ROUNDING else 0.0


def _common(path: Path) -> Path:
    """The path with the increments on which two responses are held against each other."""
    rows = min(ROWS, max(4, MOST_ROWS // path.segment_count))
    common = path.with_increments(tuple(rows if s.durations.size == 1 else 1 for s in path.segments))
    if common.increment_count > LARGEST_RUN:
        expected = f"at most {LARGEST_RUN} rows long, {rows} a straight segment, repeats counted"
        raise ParameterError(f"path {path.name!r}", expected, common.increment_count)
    return common


def _compare_path(a: Material, b: Material, path: Path, tolerance: float) -> PathComparison:
    """Rounding first, by the same increments on both; what is not rounding is judged on the reference solutions."""
    common = _common(path)
    responses: list[History | None] = []
    reasons = []
    for which, material in (("first", a), ("second", b)):
        try:
            responses.append(drive(LinearViscoelastic(material=material), common))
        except ShiftRangeError as error:
            responses.append(None)
            reasons.append(f"{which} card: {error}")
    first, second = responses
    if first is None or second is None:
        return PathComparison(
            path=path,
            difference=None,
            rounding=0.0,
            identical=False,
            bound=0.0,
            estimated=False,
            holds=False,
            first=first,
            second=second,
            reason="; ".join(reasons),
        )
    difference = largest_difference(first, second)
    rounding = rounding_bound(a, common, first) + rounding_bound(b, common, second)
    if difference.relative <= rounding:
        return PathComparison(
            path=path,
            difference=difference,
            rounding=rounding,
            identical=True,
            bound=0.0,
            estimated=False,
            holds=True,
            first=first,
            second=second,
        )
    return _judged(a, b, path, common, tolerance, rounding)


def _judged(a: Material, b: Material, path: Path, common: Path, tolerance: float, rounding: float) -> PathComparison:
    accuracy = DEFAULT_ACCURACY
    while True:
        one, other = (solve(material, common, accuracy=accuracy) for material in (a, b))
        difference = largest_difference(one.history, other.history)
        bound = _bound(one, other)
        undecided = abs(difference.relative - tolerance) <= bound
        if not undecided or accuracy * TIGHTER < TIGHTEST:
            break
        accuracy *= TIGHTER
    return PathComparison(
        path=path,
        difference=difference,
        rounding=rounding,
        identical=False,
        bound=bound,
        estimated=one.estimated or other.estimated,
        holds=difference.relative + bound <= tolerance,
        first=one.history,
        second=other.history,
    )


def _bound(one: Reference, other: Reference) -> float:
    """Half-widths of both solutions as a fraction of the peak of the first."""
    shares = []
    for first, second, values in (
        (one.history.bound, other.history.bound, one.history.stress_components),
        (one.strain_bound, other.strain_bound, one.history.strain_components),
    ):
        assert first is not None
        assert second is not None
        peak = float(np.abs(values).max())
        if peak > 0.0:
            shares.append(float((first + second).max()) / peak)
    return max(shares, default=0.0)


def verdict(results: Sequence[PathComparison]) -> Same:
    """Over all paths, the worst counts."""
    if all(result.identical for result in results):
        return "identical"
    return "within tolerance" if all(result.holds for result in results) else "different"


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
    return Comparison(same=verdict(results), tolerance=tolerance, shift=shift, paths=tuple(results))
