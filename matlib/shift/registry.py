"""Shift laws of other people: the entry points of the group ``cardproof.shift_laws``.

An entry point loads a callable ``factory(constants, temperature_unit) -> ShiftLaw``. It is given the card's ``[shift]``
table as it stands, without the keys ``law``, ``measured`` and ``outside``, and the unit that its temperatures are in.
It may raise `ParameterError`, which is reported against the card. The names of the laws of this package go first: a
plug-in cannot take their place.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from matlib.errors import CardproofError
from matlib.shift.base import ShiftLaw
from matlib.units import Unit

if TYPE_CHECKING:
    from importlib.metadata import EntryPoint

__all__ = ["GROUP", "PluginError", "PluginLaw", "plugin_laws"]

GROUP = "cardproof.shift_laws"


class PluginError(CardproofError, RuntimeError):
    """A plug-in that does not keep its side of the contract.

    Parameters
    ----------
    law : str
        Name of the law, that of the entry point.
    target : str
        What the entry point loads, ``module:object``.
    reason : str
        What went wrong.
    """

    def __init__(self, law: str, target: str, reason: str) -> None:
        super().__init__(law, target, reason)
        self.law = law
        self.target = target
        self.reason = reason

    def __str__(self) -> str:
        return f"shift law {self.law} comes from the plug-in {self.target}, which {self.reason}"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PluginLaw:
    """A plug-in that was found and is not loaded before it is called.

    Parameters
    ----------
    name : str
        The law's name in cards.
    entry_points : tuple of EntryPoint
        Those of this name; more than one is an error when the law is used.
    """

    name: str
    entry_points: tuple[EntryPoint, ...]

    def __call__(self, constants: Mapping[str, Any], temperature_unit: Unit) -> ShiftLaw:
        """Make the law from the constants of a card.

        Parameters
        ----------
        constants : mapping
            The card's ``[shift]`` table without ``law``, ``measured`` and ``outside``.
        temperature_unit : Unit
            The unit of its temperatures.

        Raises
        ------
        PluginError
            If the plug-in cannot be loaded, fails, or gives something that is no `ShiftLaw`.
        ParameterError
            As the plug-in raises it.
        """
        factory = self._load()
        try:
            law = factory(dict(constants), temperature_unit)
        except CardproofError:
            raise
        except Exception as error:
            raise self._error(f"raised {type(error).__name__}: {error}") from error
        if not isinstance(law, ShiftLaw):
            raise self._error(f"gave a {type(law).__name__} where a ShiftLaw is expected")
        return law

    def _load(self) -> Callable[[dict[str, Any], Unit], object]:
        if len(self.entry_points) > 1:
            raise self._error("is one of several installed under that name: remove all but one")
        try:
            factory = self.entry_points[0].load()
        except Exception as error:
            raise self._error(f"cannot be imported: {type(error).__name__}: {error}") from error
        if not callable(factory):
            raise self._error(f"is a {type(factory).__name__}, not a callable")
        return factory

    def _error(self, reason: str) -> PluginError:
        return PluginError(self.name, ", ".join(point.value for point in self.entry_points), reason)


def plugin_laws() -> dict[str, PluginLaw]:
    """Find the installed plug-ins; none of them is loaded.

    Returns
    -------
    laws : dict
        By name, in alphabetical order.

    Notes
    -----
    Reading the metadata of all installed distributions takes time: call this only where a law's name is not one of
    the package's own.
    """
    from importlib.metadata import entry_points

    found: dict[str, dict[str, EntryPoint]] = {}
    for point in entry_points(group=GROUP):
        found.setdefault(point.name, {})[point.value] = point  # the same one met twice on the path is one
    return {name: PluginLaw(name=name, entry_points=tuple(found[name].values())) for name in sorted(found)}
