"""What moved between two cards, part by part, and whether the behaviour noticed."""

from __future__ import annotations

import contextlib
from collections.abc import Collection, Sequence
from dataclasses import dataclass

from drivers.baseline_paths import RecordedPath
from drivers.studies.bench import Bench, Change
from drivers.studies.moved_constants import ConstantChange, constant_changes
from drivers.studies.parts import Form, Split, differing, referred, split, swapped
from drivers.studies.trading import that_matter, traded
from matlib.card import Card
from matlib.errors import CardproofError
from matlib.material import Material

__all__ = ["Moved", "what_moved"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Moved:
    """A part of the card that is not what it was.

    Parameters
    ----------
    part : str
        One of `parts.PARTS`.
    put_in : Change
        Change of the behaviour when this part of the new card alone is put into the recorded card.
    taken_back : Change
        Change of the behaviour when this part of the recorded card is put back into the new card.
    matters : bool
        Whether the behaviour noticed: whether either change is beyond the tolerance and is not undone by other parts.
    together : tuple of str
        Parts that undo its effect.
    constants : tuple of ConstantChange
        In the order of the file.
    """

    part: str
    put_in: Change
    taken_back: Change
    matters: bool
    together: tuple[str, ...] = ()
    constants: tuple[ConstantChange, ...] = ()

    @property
    def effect(self) -> Change:
        """The larger of the two changes, in units of the tolerance."""
        return max(self.put_in, self.taken_back, key=lambda change: change.ratio)


def what_moved(recorded: Card, now: Card, paths: Sequence[RecordedPath]) -> tuple[Moved, ...]:
    """Parts of a card that moved, by substitution: one part of either card at a time in the other.

    Parameters
    ----------
    recorded, now : Card
    paths : sequence of RecordedPath
        On which the effects are measured, against each one's tolerance.

    Returns
    -------
    moved : tuple of Moved
        Those that matter first, then by their effect. Empty for a card in another form, about another reference temperature or in
        other units, that says the same to rounding.

    Raises
    ------
    FileError
        If either card is no material.

    Notes
    -----
    A reference temperature that moved, with constants and relaxation times along, is no change. Cards with different references
    are therefore taken apart both as they stand and about one reference, and what explains the change with fewer parts, or
    with smaller effects, is reported.
    """
    old, new = recorded.material(), now.material()
    form = _form(recorded, now, old, new)
    bench = Bench(paths)
    before, after = bench.run(old), bench.run(new)
    base = split(old, form)
    readings = []
    for parts in _readings(base, split(new, form)):
        names = differing(base, parts, bench.temperatures)
        if not names:
            return ()
        put_in = {name: bench.effect(before, swapped(base, parts, {name})) for name in names}
        readings.append((len(names), sum(min(change.ratio, 1e9) for change in put_in.values()), parts, put_in))
    _, _, parts, put_in = min(readings, key=lambda reading: reading[:2])

    def joint(group: Collection[str]) -> float:
        there = bench.effect(before, swapped(base, parts, group))
        back = bench.effect(after, swapped(parts, base, group))
        return max(there.ratio, back.ratio)

    taken_back = {name: bench.effect(after, swapped(parts, base, {name})) for name in put_in}
    ratios = {name: max(put_in[name].ratio, taken_back[name].ratio) for name in put_in}
    together = traded(ratios, joint)
    changed = bench.change(before, after).ratio > 1.0
    matter = that_matter(ratios, together, changed)
    moved = [
        Moved(
            part=name,
            put_in=put_in[name],
            taken_back=taken_back[name],
            matters=name in matter,
            together=together.get(name, ()),
            constants=constant_changes(recorded, now, name, bench, before, name in matter),
        )
        for name in put_in
    ]
    return tuple(sorted(moved, key=lambda one: (not one.matters, -one.effect.ratio)))


def _form(recorded: Card, now: Card, old: Material, new: Material) -> Form:
    """The terms in which the recorded card is written, where the new one can be written so too."""
    solids = all(series.equilibrium > 0.0 for m in (old, new) for series in (m.shear, m.bulk))
    laterals = [None if card.document.prony is None else card.document.prony.lateral for card in (recorded, now)]
    elastic_bulk = old.bulk.times.size == 0 and new.bulk.times.size == 0
    return Form(
        long_term=recorded.document.elastic.state == "long-term" and solids,
        young=laterals == ["constant K", "constant K"] and elastic_bulk,
    )


def _readings(base: Split, new: Split) -> list[Split]:
    """The new card as it stands, and about the recorded card's reference temperature where it has another."""
    readings = [new]
    if new.shift.T_ref != base.shift.T_ref:
        with contextlib.suppress(CardproofError):  # a law that cannot be moved is read as it stands
            readings.append(referred(new, base.shift.T_ref))
    return readings
