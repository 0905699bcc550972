"""Telling things that moved together without effect from those that matter."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from itertools import combinations

__all__ = ["that_matter", "traded"]

MOST_TRADED = 6
"""Of so many constants that matter alone every combination is tried for one without effect; of more, none."""

SHARE = 0.5
"""Where only a sum of small changes matters, those with at least this part of the largest effect are held to matter."""


def traded(ratios: Mapping[str, float], joint: Callable[[Collection[str]], float]) -> dict[str, tuple[str, ...]]:
    """Groups, the smallest first, of which each member has an effect alone and the whole has none."""
    loud = [name for name, ratio in ratios.items() if ratio > 1.0]
    found: dict[str, tuple[str, ...]] = {}
    if len(loud) > MOST_TRADED:
        return found
    for size in range(2, len(loud) + 1):
        for group in combinations(loud, size):
            if not found.keys() & set(group) and joint(group) <= 1.0:
                found |= {name: tuple(other for other in group if other != name) for name in group}
    return found


def that_matter(ratios: Mapping[str, float], together: Mapping[str, object], changed: bool) -> set[str]:
    """Names with an effect that nothing undoes; where only a sum of them has one, the largest of them."""
    free = {name: ratio for name, ratio in ratios.items() if name not in together}
    matter = {name for name, ratio in free.items() if ratio > 1.0}
    if changed and not matter and free:
        largest = max(free.values())
        matter = {name for name, ratio in free.items() if ratio >= SHARE * largest}
    return matter
