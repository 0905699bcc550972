"""Slips in the moduli, the fractions and the times."""

from __future__ import annotations

import math
from collections.abc import Iterator

from drivers.studies.slips.proposal import Proposal, with_elastic, with_prony
from drivers.studies.slips.shift_slips import scaled_times
from matlib.card import Card
from matlib.units import STRESS

__all__ = [
    "bulk_relaxation",
    "fraction_base",
    "modulus_kind",
    "modulus_state",
    "stress_unit",
    "time_unit",
]

TIME_FACTORS = {
    60.0: "the unit of the relaxation times was mistaken, a factor 60",
    3600.0: "the unit of the relaxation times was mistaken, a factor 3600",
    86400.0: "the unit of the relaxation times was mistaken, a factor 86400",
    1000.0: "the unit of the relaxation times was mistaken, a factor 1000",
    1e6: "the unit of the relaxation times was mistaken, a factor 1e6",
    10.0: "relaxation times were made from viscosities in poise taken for Pa s, or the reverse, a factor 10",
}
STRESS_FACTORS = (1e3, 1e6, STRESS["psi"].scale, STRESS["psi"].scale / 1e3, STRESS["psi"].scale / 1e6)


def modulus_state(card: Card, other: Card) -> Iterator[Proposal]:
    """Instantaneous constants taken as long-term ones, or the reverse."""
    found = card.document.elastic.state
    fits = "long-term" if found == "instantaneous" else "instantaneous"
    yield Proposal(
        card=with_elastic(card, state=fits),
        key="elastic.state",
        found=found,
        fits=fits,
        because="instantaneous and long-term elastic constants were exchanged",
    )


def fraction_base(card: Card, other: Card) -> Iterator[Proposal]:
    """Fractions of one limit taken as fractions of the other."""
    prony = card.document.prony
    if prony is None or prony.relative_to == "absolute":
        return
    fits = "long-term" if prony.relative_to == "instantaneous" else "instantaneous"
    yield Proposal(
        card=with_prony(card, relative_to=fits),
        key="prony.relative_to",
        found=prony.relative_to,
        fits=fits,
        because="fractions of one limit of the modulus were taken as fractions of the other",
    )


def modulus_kind(card: Card, other: Card) -> Iterator[Proposal]:
    """One modulus entered under the name of another."""
    given = card.document.elastic.given
    for key in ("E", "G", "K"):
        if key not in given:
            continue
        for meant in ("E", "G", "K"):
            if meant == key:
                continue
            changes: dict[str, float | None] = {key: given.get(meant), meant: given[key]}
            yield Proposal(
                card=with_elastic(card, **changes),
                key=f"elastic.{key}",
                found=f"{key} = {given[key]:.6g}",
                fits=f"{meant} = {given[key]:.6g}",
                because="a modulus was entered under the name of another",
            )


def time_unit(card: Card, other: Card) -> Iterator[Proposal]:
    """Relaxation times in another unit than the card says."""
    if card.document.prony is None:
        return
    for size, because in TIME_FACTORS.items():
        for factor in (size, 1.0 / size):
            yield scaled_times(card, factor, because)


def stress_unit(card: Card, other: Card) -> Iterator[Proposal]:
    """Moduli in another unit than the card says."""
    given = {key: value for key, value in card.document.elastic.given.items() if key != "nu"}
    prony = card.document.prony
    absolute = prony is not None and prony.relative_to == "absolute"
    for size in STRESS_FACTORS:
        for factor in (size, 1.0 / size):
            corrected = with_elastic(card, **{key: factor * value for key, value in given.items()})
            proposal = Proposal(
                card=corrected,
                key=" and ".join(f"elastic.{key}" for key in given),
                found=", ".join(f"{value:.6g}" for value in given.values()),
                fits=", ".join(f"{factor * value:.6g}" for value in given.values()),
                because=f"the unit of the moduli was mistaken by a factor {size:.6g}",
            )
            if not absolute:
                yield proposal
                continue
            for scaled in (_with_moduli(corrected, factor), corrected, _with_moduli(card, factor)):
                yield Proposal(
                    card=scaled,
                    key=f"{proposal.key}, and the moduli of prony",
                    found=proposal.found,
                    fits=f"{proposal.fits} (factor {factor:.6g})",
                    because=proposal.because,
                )


def _with_moduli(card: Card, factor: float) -> Card:
    prony = card.document.prony
    assert prony is not None
    rows = {
        name: [[t, factor * g] for t, g in getattr(prony, name)]
        for name in ("shear", "bulk", "young")
        if getattr(prony, name) is not None
    }
    return with_prony(card, **rows)


def bulk_relaxation(card: Card, other: Card) -> Iterator[Proposal]:
    """Relaxation of shear alone against relaxation of shear and bulk alike."""
    prony = card.document.prony
    if prony is None:
        return
    because = "relaxation of shear alone and relaxation of shear and bulk alike were exchanged"
    if prony.young is not None:
        fits = "constant K" if prony.lateral == "constant nu" else "constant nu"
        yield Proposal(
            card=with_prony(card, lateral=fits),
            key="prony.lateral",
            found=str(prony.lateral),
            fits=fits,
            because=because,
        )
        return
    if prony.bulk is not None:
        yield Proposal(
            card=with_prony(card, bulk=None, shear=prony.shear),
            key="prony.bulk",
            found=f"{len(prony.bulk)} terms",
            fits="no such key: elastic bulk",
            because=because,
        )
    if prony.shear is not None:
        ratio = _bulk_to_shear(card) if prony.relative_to == "absolute" else 1.0
        if math.isfinite(ratio):
            yield Proposal(
                card=with_prony(card, bulk=[[t, ratio * g] for t, g in prony.shear]),
                key="prony.bulk",
                found="nothing" if prony.bulk is None else f"{len(prony.bulk)} terms",
                fits="the terms of prony.shear",
                because=because,
            )


def _bulk_to_shear(card: Card) -> float:
    try:
        material = card.material()
    except ValueError:
        return math.inf
    return material.bulk.instantaneous / material.shear.instantaneous
