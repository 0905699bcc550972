"""Every error that this project raises on purpose: a type with fields, which is also a builtin error."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

__all__ = [
    "CardproofError",
    "ConversionError",
    "Fault",
    "FaultyInputError",
    "FileError",
    "FilesError",
    "ParameterError",
    "PoleError",
    "ShiftRangeError",
    "UnknownNameError",
    "both_scales",
    "nearest_hint",
]


def both_scales(T: float) -> str:
    """Write a temperature [K] in kelvin and in degrees Celsius, as every message does.

    Examples
    --------
    >>> both_scales(353.15)
    '353.15 K (80 degC)'
    """
    return f"{T:.6g} K ({round(T - 273.15, 4):.6g} degC)"


class CardproofError(Exception):
    """Base of all errors that are raised on purpose; never raised itself."""

    def lines(self) -> list[str]:
        """One line a fault, for a terminal."""
        return [f"cardproof: {self}"]


class ParameterError(CardproofError, ValueError):
    """A number or an array that a formula cannot take.

    Parameters
    ----------
    name : str
        The parameter, as the caller knows it.
    expected : str
        What it must be, unit included.
    found : object
        What it was.
    hint : str, optional
        What to write instead.

    Examples
    --------
    >>> print(ParameterError("tau", "> 0 s", -3.0))
    `tau` must be > 0 s (got -3.0)
    """

    def __init__(self, name: str, expected: str, found: object, hint: str = "") -> None:
        super().__init__(name, expected, found, hint)
        self.name = name
        self.expected = expected
        self.found = found
        self.hint = hint

    def __str__(self) -> str:
        text = f"`{self.name}` must be {self.expected} (got {self.found})"
        return f"{text}; {self.hint}" if self.hint else text


class ShiftRangeError(CardproofError, ValueError):
    """A shift law was asked for a temperature where it gives no answer.

    Parameters
    ----------
    law : str
        Name of the law.
    temperature : float
        The temperature asked for [K].
    limit : float
        The nearest temperature that the law still answers, or its pole [K].
    reason : str
        Why there is no answer.
    """

    def __init__(self, law: str, temperature: float, limit: float, reason: str) -> None:
        super().__init__(law, temperature, limit, reason)
        self.law = law
        self.temperature = temperature
        self.limit = limit
        self.reason = reason

    def __str__(self) -> str:
        return (
            f"shift law {self.law}: no shift factor at {both_scales(self.temperature)}: "
            f"{self.reason} {both_scales(self.limit)}"
        )


class PoleError(ShiftRangeError):
    """A temperature at or below the pole, where the law diverges."""

    def __init__(self, law: str, temperature: float, pole: float) -> None:
        super().__init__(law, temperature, pole, "it is at or below the pole T_inf =")
        self.args = (law, temperature, pole)


def nearest_hint(found: object, known: Iterable[str]) -> str:
    """Which of the known words to write in place of one, where one of them is near; else nothing.

    Examples
    --------
    >>> nearest_hint("WLF", ["wlf", "vft"]), nearest_hint("table", ["wlf", "vft"])
    ("write 'wlf'", '')
    """
    import difflib

    if not isinstance(found, str):
        return ""
    by_case = {name.casefold(): name for name in known}
    close = difflib.get_close_matches(found.casefold(), by_case, n=1)
    return f"write {by_case[close[0]]!r}" if close else ""


class UnknownNameError(CardproofError, LookupError):
    """A name that stands for nothing; the message lists the known ones."""

    def __init__(self, kind: str, name: object, known: Iterable[str]) -> None:
        self.kind = kind
        self.name = name
        self.known = tuple(known)
        super().__init__(kind, name, self.known)

    def __str__(self) -> str:
        hint = nearest_hint(self.name, self.known)
        return f"unknown {self.kind} {self.name!r}: use one of {', '.join(self.known)}" + (hint and f"; {hint}")


class ConversionError(CardproofError, ValueError):
    """A conversion of a shift law that cannot be made."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """One thing wrong in a file: where, what was found, what is expected, what to write instead."""

    key: str
    found: str
    expected: str
    hint: str = ""

    def __str__(self) -> str:
        text = f"{self.key}: found {self.found}, expected {self.expected}"
        return f"{text}; {self.hint}" if self.hint else text


class FileError(CardproofError, ValueError):
    """All faults of one file at once.

    Parameters
    ----------
    file : str
        The file, as the user named it.
    faults : sequence of Fault
        At least one.

    Examples
    --------
    >>> print(FileError("a.card.toml", [Fault(key="shift.C2", found="-51.6", expected="a number > 0")]))
    a.card.toml: shift.C2: found -51.6, expected a number > 0
    """

    def __init__(self, file: str, faults: Sequence[Fault]) -> None:
        self.file = str(file)
        self.faults = tuple(faults)
        super().__init__(self.file, self.faults)

    def lines(self) -> list[str]:
        """One line a fault, the file named in each."""
        return [f"{self.file}: {fault}" for fault in self.faults]

    def __str__(self) -> str:
        return "\n".join(self.lines())


class FilesError(CardproofError, ValueError):
    """Faults of several files at once."""

    def __init__(self, errors: Sequence[FileError]) -> None:
        self.errors = tuple(errors)
        super().__init__(self.errors)

    def lines(self) -> list[str]:
        """One line a fault, its file named in each."""
        return [line for error in self.errors for line in error.lines()]

    def __str__(self) -> str:
        return "\n".join(self.lines())


class FaultyInputError(CardproofError, ValueError):
    """Faults found before the file's name is known; whoever knows the name makes it a `FileError`."""

    def __init__(self, faults: Sequence[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__(self.faults)

    def __str__(self) -> str:
        return "\n".join(str(fault) for fault in self.faults)

    def in_file(self, file: str) -> FileError:
        """Same faults, the file named."""
        return FileError(file, self.faults)
