"""Try every known slip on either card, alone and in pairs, and list those that explain the difference."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from drivers.studies.slips.catalogue import CATALOGUE
from drivers.studies.slips.evidence import Evidence, Signature
from drivers.studies.slips.proposal import Proposal
from matlib.card import Card
from matlib.errors import CardproofError
from matlib.material import Material

__all__ = ["Slip", "find_slips"]

NEARLY_ALL = 0.05
"""A slip explains a difference where at most this part of it remains, or of the peak where the difference is larger than that."""

TWIN = 3.0
"""Two explanations cannot be told apart where what remains of one is within this factor of the other,"""

ALL_GONE = 1e-6
"""or where nothing that a measurement could see remains of either."""

CONFIRMED = 12
"""How many candidates of the screening are confirmed on responses."""

PAIR_SEEDS = 400


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Slip:
    """A mistake, or a pair of them, that explains a difference.

    Parameters
    ----------
    ids : tuple of str
        One id of the catalogue, or two.
    explanation : str
        Which key to look at and what would fit.
    remaining : float
        Largest difference that is left, as a fraction of the peak.
    twins : tuple of str
        Ids of other explanations that the evidence cannot tell from this one.
    """

    ids: tuple[str, ...]
    explanation: str
    remaining: float
    twins: tuple[str, ...] = ()

    @property
    def id(self) -> str:
        """The ids, joined."""
        return " + ".join(self.ids)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Candidate:
    """Corrections of one card that bring the two together, as far as closed forms can tell."""

    ids: tuple[str, ...]
    rank: tuple[int, ...]
    on_first: bool
    steps: tuple[Proposal, ...]
    material: Material
    distance: float


def find_slips(
    a: Card,
    b: Card,
    evidence: Evidence,
    *,
    pairs: bool = True,
    progress: Callable[[int], None] | None = None,
) -> tuple[Slip, ...]:
    """Slips that explain why two cards differ.

    Parameters
    ----------
    a : Card
        The card that counts as right.
    b : Card
        The card in question; corrections of it are preferred to those of `a`.
    evidence : Evidence
        Window and paths on which the cards were found to differ.
    pairs : bool, optional
        Whether to try pairs where no single slip explains the difference.
    progress : callable, optional
        Called with the number of candidates tried since the last call.

    Returns
    -------
    slips : tuple of Slip
        The best explanation first: what remains decides, among equals the simpler. Empty where none explains the difference.
    """
    first, second = a.material(), b.material()
    sign_a, sign_b = evidence.signature(first), evidence.signature(second)
    before = evidence.distance(sign_a, sign_b)
    if before == 0.0:
        return ()
    singles = list(_singles(a, b, sign_a, sign_b, evidence, progress))
    found = _confirmed(singles, first, second, evidence, before)
    if not found and pairs:
        found = _confirmed(
            list(_pairs(a, b, sign_a, sign_b, evidence, singles, progress)), first, second, evidence, before
        )
    return _with_twins(found)


def _singles(
    a: Card,
    b: Card,
    sign_a: Signature | None,
    sign_b: Signature | None,
    evidence: Evidence,
    progress: Callable[[int], None] | None,
) -> Iterator[_Candidate]:
    for on_first, card, other in ((False, b, a), (True, a, b)):
        for rank, kind in enumerate(CATALOGUE):
            for proposal in kind.proposals(card, other):
                candidate = _tried((kind.id,), (rank,), on_first, (proposal,), sign_a, sign_b, evidence)
                if progress is not None:
                    progress(1)
                if candidate is not None:
                    yield candidate


def _tried(
    ids: tuple[str, ...],
    rank: tuple[int, ...],
    on_first: bool,
    steps: tuple[Proposal, ...],
    sign_a: Signature | None,
    sign_b: Signature | None,
    evidence: Evidence,
) -> _Candidate | None:
    """A candidate with its distance; None where the corrected card is no material."""
    try:
        material = steps[-1].card.material()
    except CardproofError:
        return None
    signature = evidence.signature(material)
    distance = evidence.distance(signature, sign_b) if on_first else evidence.distance(sign_a, signature)
    return _Candidate(ids=ids, rank=rank, on_first=on_first, steps=steps, material=material, distance=distance)


def _pairs(
    a: Card,
    b: Card,
    sign_a: Signature | None,
    sign_b: Signature | None,
    evidence: Evidence,
    singles: list[_Candidate],
    progress: Callable[[int], None] | None,
) -> Iterator[_Candidate]:
    """Every second slip on top of every first one, on the same card."""
    ranks = {kind.id: rank for rank, kind in enumerate(CATALOGUE)}
    seeds = sorted(singles, key=lambda c: (c.on_first, c.distance))[:PAIR_SEEDS]
    for seed in seeds:
        other = b if seed.on_first else a
        for kind in CATALOGUE:
            if ranks[kind.id] <= seed.rank[0]:
                continue  # each pair once: slips of different keys commute
            for proposal in kind.proposals(seed.steps[-1].card, other):
                candidate = _tried(
                    (seed.ids[0], kind.id),
                    (seed.rank[0], ranks[kind.id]),
                    seed.on_first,
                    (seed.steps[0], proposal),
                    sign_a,
                    sign_b,
                    evidence,
                )
                if progress is not None:
                    progress(1)
                if candidate is not None:
                    yield candidate


def _confirmed(
    candidates: list[_Candidate], first: Material, second: Material, evidence: Evidence, before: float
) -> list[Slip]:
    """Candidates that explain nearly all of the difference in closed forms and in the responses, one a set of ids."""
    limit = NEARLY_ALL * min(before, 1.0)
    likely = sorted((c for c in candidates if c.distance <= limit), key=lambda c: (c.distance, c.on_first, c.rank))
    chosen: dict[tuple[str, ...], _Candidate] = {}
    for candidate in likely:
        known = chosen.get(candidate.ids)
        # A correction of the card in question is preferred where it explains as well as one of the other card.
        if known is None or (known.on_first and not candidate.on_first and _alike(candidate.distance, known.distance)):
            chosen[candidate.ids] = candidate
    if not chosen:
        return []
    truth_a, truth_b = evidence.responses(first), evidence.responses(second)
    initial = evidence.remaining(truth_a, truth_b)
    limit = NEARLY_ALL * min(initial, 1.0)
    slips = []
    for candidate in list(chosen.values())[:CONFIRMED]:
        response = evidence.responses(candidate.material)
        remaining = (
            evidence.remaining(response, truth_b) if candidate.on_first else evidence.remaining(truth_a, response)
        )
        if remaining <= limit:
            slips.append((remaining, candidate))
    slips.sort(key=lambda pair: (_floor(pair[0]), pair[1].rank))
    return [
        Slip(ids=candidate.ids, explanation=_explained(candidate), remaining=remaining)
        for remaining, candidate in slips
    ]


def _floor(remaining: float) -> float:
    """What remains, with everything that cannot be seen put at nothing."""
    return 0.0 if remaining <= ALL_GONE else remaining


def _alike(one: float, other: float) -> bool:
    return max(one, other) <= ALL_GONE or max(one, other) <= TWIN * min(one, other)


def _explained(candidate: _Candidate) -> str:
    sentences = []
    for step in candidate.steps:
        sentences.append(f"{step.key} of {step.card.file}: found {step.found}, {step.fits} would fit; {step.because}.")
    return " ".join(sentences)


def _with_twins(slips: list[Slip]) -> tuple[Slip, ...]:
    return tuple(
        Slip(
            ids=slip.ids,
            explanation=slip.explanation,
            remaining=slip.remaining,
            twins=tuple(o.id for o in slips if o is not slip and _alike(o.remaining, slip.remaining)),
        )
        for slip in slips
    )
