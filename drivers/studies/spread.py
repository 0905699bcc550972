"""Does a change of a card exceed the scatter of its calibration?"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from drivers.card_constants import with_constants
from drivers.difference import largest_difference
from drivers.history import History
from drivers.spread_file import Spread
from drivers.studies.baseline import PathVerdict, Verification
from drivers.studies.bench import Bench
from matlib.arrays import FloatArray
from matlib.card import Card
from matlib.errors import CardproofError, ParameterError
from matlib.material import Material

__all__ = ["LEVEL", "PathScatter", "Scatter", "scatter"]

LEVEL = 0.95
"""The part of the samples that the band holds."""

MOST_DRAWS = 20
"""Draws for each sample at most, before the spread is said to make hardly any material."""

FEWEST = 20


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PathScatter:
    """Scatter of the responses to one path.

    Parameters
    ----------
    verdict : PathVerdict
        The card in question on this path.
    band : float
        Largest difference from the recorded card that `LEVEL` of the samples stay within, as a fraction of the peak.
    middle : float
        The same of half the samples.
    centre : History
        Response of the recorded card, driven as the samples are.
    low, high : ndarray, shape (n, 6)
        Between which `LEVEL` of the samples' stresses lie in each row of `centre` [Pa].
    """

    verdict: PathVerdict
    band: float
    middle: float
    centre: History
    low: FloatArray
    high: FloatArray

    @property
    def exceeds(self) -> bool:
        """Whether the card's change is larger than the band, or it has no response at all."""
        relative = self.verdict.relative
        return relative is None or relative - self.verdict.bound > self.band


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Scatter:
    """Scatter of the calibration on all paths.

    Parameters
    ----------
    samples : int
    redrawn : int
        Draws that were no material, or had no response to a path, and were drawn again.
    seed : int
    paths : tuple of PathScatter
    """

    samples: int
    redrawn: int
    seed: int
    paths: tuple[PathScatter, ...]

    @property
    def exceeds(self) -> bool:
        """Whether the change exceeds the scatter on any path."""
        return any(path.exceeds for path in self.paths)


def scatter(
    recorded: Card,
    spread: Spread,
    verification: Verification,
    *,
    samples: int = 200,
    seed: int = 0,
    progress: Callable[[int], None] | None = None,
) -> Scatter:
    """Sample the constants of the recorded card, and measure how far the responses scatter.

    Parameters
    ----------
    recorded : Card
    spread : Spread
        Of that card.
    verification : Verification
        Of the card in question.
    samples : int, optional
        ``>= 20``.
    seed : int, optional
        The same seed gives the same samples.
    progress : callable, optional
        Called with 1 after each sample.

    Returns
    -------
    Scatter

    Raises
    ------
    ParameterError
        If hardly any draw is a material.
    FileError
        If the recorded card is none.
    """
    if samples < FEWEST:
        raise ParameterError("samples", f">= {FEWEST}", samples)
    bench = Bench([verdict.recorded for verdict in verification.paths], finer=1)
    centre = [response for response in bench.run(recorded.material()) if response is not None]
    if len(centre) < len(bench.paths):
        raise ParameterError("recorded card", "one with a response to every path", f"{len(centre)} responses")
    told = progress if progress is not None else lambda count: None
    sampled = _Samples(recorded, spread, seed, samples)
    kept = _side_by_side(bench, sampled.materials(), told) or _one_by_one(bench, sampled, told)
    paths = tuple(_path_scatter(verdict, centre[k], kept[k]) for k, verdict in enumerate(verification.paths))
    return Scatter(samples=samples, redrawn=sampled.redrawn, seed=seed, paths=paths)


class _Samples:
    """Materials of a card with sampled constants; a draw that is none, or is sent back, is drawn again and counted."""

    def __init__(self, recorded: Card, spread: Spread, seed: int, samples: int) -> None:
        self.recorded, self.spread, self.seed, self.samples = recorded, spread, seed, samples
        self.redrawn = 0

    def materials(self) -> list[Material]:
        """The first so many, from the beginning of the draws."""
        self.redrawn, drawn = 0, self.draws()
        return [next(drawn) for _ in range(self.samples)]

    def draws(self) -> Iterator[Material]:
        """One after the other."""
        for values in _draws(self.spread, self.seed):
            try:
                yield with_constants(
                    self.recorded, dict(zip(self.spread.keys, values.tolist(), strict=True))
                ).material()
            except CardproofError:
                self.send_back()

    def send_back(self) -> None:
        """Count a draw that will not do; `ParameterError` where hardly any does."""
        self.redrawn += 1
        if self.redrawn > MOST_DRAWS * self.samples:
            hint = "look at the standard deviations: are they in the card's units?"
            found = f"{self.redrawn} draws that are none"
            raise ParameterError("spread", "one that mostly makes materials", found, hint)


def _side_by_side(
    bench: Bench, materials: Sequence[Material], told: Callable[[int], None]
) -> list[list[History]] | None:
    """Responses of every sample to each path; None where a sample has none."""
    share = len(materials) / len(bench.paths)
    ensembles = bench.run_many(materials, lambda paths: told(round(share * paths) - round(share * (paths - 1))))
    return None if ensembles is None else [[each.member(j) for j in range(len(materials))] for each in ensembles]


def _one_by_one(bench: Bench, sampled: _Samples, told: Callable[[int], None]) -> list[list[History]]:
    """The same where some samples have no response, and others take their place."""
    sampled.redrawn, drawn = 0, sampled.draws()
    kept: list[tuple[History, ...]] = []
    while len(kept) < sampled.samples:
        responses = tuple(response for response in bench.run(next(drawn)) if response is not None)
        if len(responses) < len(bench.paths):
            sampled.send_back()
            continue
        kept.append(responses)
        told(1)
    return [list(responses) for responses in zip(*kept, strict=True)]


def _draws(spread: Spread, seed: int) -> Iterator[FloatArray]:
    """Normally distributed constants, one set after the other."""
    values, vectors = np.linalg.eigh(spread.covariance)
    root = vectors * np.sqrt(np.maximum(values, 0.0))
    generator = np.random.default_rng(seed)
    while True:
        yield spread.means + root @ generator.standard_normal(len(spread.keys))


def _path_scatter(verdict: PathVerdict, centre: History, responses: list[History]) -> PathScatter:
    distances = [largest_difference(centre, response).relative for response in responses]
    middle, band = np.quantile(distances, [0.5, LEVEL])
    stresses = np.stack([response.stress_components for response in responses])
    low, high = np.quantile(stresses, [0.5 - 0.5 * LEVEL, 0.5 + 0.5 * LEVEL], axis=0)
    return PathScatter(verdict=verdict, band=float(band), middle=float(middle), centre=centre, low=low, high=high)
