"""Reading ``*.routine.toml``: what a foreign routine is and how it is called."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field, model_validator

from matlib.arrays import FloatArray, frozen
from matlib.card import Card, read_card
from matlib.documents import ContradictionError, Document, validated
from matlib.errors import Fault, FaultyInputError, FileError
from matlib.files import read_toml
from matlib.units import STRESS, TEMPERATURE, TIME, Unit

__all__ = ["SUFFIX", "RoutineDocument", "RoutineFile", "is_routine_file", "read_routine_file"]

SUFFIX = ".routine.toml"
DEFAULT_SYMBOL = "stress_update"
MIB = 2**20


class RoutineDocument(Document):
    """A routine file."""

    name: Annotated[str, Field(max_length=200)] = ""
    library: Annotated[str, Field(min_length=1)] | None = None
    symbol: Annotated[str, Field(min_length=1)] | None = None
    n_memory: Annotated[int, Field(ge=0, le=10_000_000)] | None = None
    python: Annotated[str, Field(min_length=1)] | None = None
    constants: list[float] = Field(default_factory=list, max_length=1_000_000)
    order: Annotated[float, Field(gt=0.0, le=10.0)] = 1.0
    card: Annotated[str, Field(min_length=1)] | None = None
    time_limit: Annotated[float, Field(gt=0.0, le=86_400.0)] = 5.0
    memory_limit: Annotated[float, Field(ge=1.0, le=1e9)] = 4096.0

    @model_validator(mode="after")
    def _one_kind(self) -> RoutineDocument:
        if (self.library is None) == (self.python is None):
            found = "neither" if self.library is None else "both"
            raise ContradictionError("", found, 'library = "x.so" or python = "module:object", one of them')
        if self.library is not None and self.n_memory is None:
            raise ContradictionError("n_memory", "nothing", "how many numbers a point remembers, with a library")
        for key in ("n_memory", "symbol"):
            if self.python is not None and getattr(self, key) is not None:
                raise ContradictionError(key, repr(getattr(self, key)), "this key with a library only")
        return self


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RoutineFile:
    """A routine file as it was read.

    Parameters
    ----------
    file : str
        Where it was read from, as the user named it.
    document : RoutineDocument
    constants : ndarray
        As handed to the routine.
    card : Card or None
        The card that the routine is meant to be.
    """

    file: str
    document: RoutineDocument
    constants: FloatArray
    card: Card | None

    @property
    def name(self) -> str:
        """Its name; the file's own where none is given."""
        return self.document.name or Path(self.file).name.removesuffix(SUFFIX)

    @property
    def folder(self) -> Path:
        """Where relative names start from."""
        return Path(self.file).resolve().parent

    @property
    def stress_unit(self) -> Unit:
        """That of its card, else Pa."""
        return STRESS["Pa"] if self.card is None else self.card.stress_unit

    @property
    def time_unit(self) -> Unit:
        """That of its card, else s."""
        return TIME["s"] if self.card is None else self.card.time_unit

    @property
    def temperature_unit(self) -> Unit:
        """That of its card, else K."""
        return TEMPERATURE["K"] if self.card is None else self.card.temperature_unit

    @property
    def loading(self) -> dict[str, Any]:
        """What the process of the routine has to load."""
        document = self.document
        limit = {"memory_limit": int(document.memory_limit * MIB)}
        if document.python is not None:
            return {"python": document.python, "folder": str(self.folder), **limit}
        library = str(self.folder / str(document.library))
        symbol = document.symbol or DEFAULT_SYMBOL
        return {"library": library, "symbol": symbol, "n_memory": document.n_memory, **limit}


def is_routine_file(file: str | Path) -> bool:
    """Whether a file is named as routine files are."""
    return str(file).endswith(SUFFIX)


def read_routine_file(file: str | Path) -> RoutineFile:
    """Read a routine file; nothing of the routine is loaded.

    Parameters
    ----------
    file : str or Path

    Returns
    -------
    RoutineFile

    Raises
    ------
    FileError
        With every fault of the file, and of the card that it names, at once.
    """
    try:
        document = validated(RoutineDocument, read_toml(file))
    except FaultyInputError as error:
        raise error.in_file(str(file)) from None
    folder, faults, card = Path(file).resolve().parent, [], None
    if document.library is not None and not (folder / document.library).is_file():
        expected = "a shared library, named from the folder of this file"
        faults.append(Fault(key="library", found=f"no file {document.library!r}", expected=expected, hint="build it"))
    if document.python is not None:
        faults += _reference_faults(document.python)
    if document.card is not None:
        try:
            card = read_card(folder / document.card)
            card.material()
        except FileError as error:
            faults += [
                Fault(key=f"card {document.card}: {f.key}", found=f.found, expected=f.expected, hint=f.hint)
                for f in error.faults
            ]
    if faults:
        raise FileError(str(file), faults)
    return RoutineFile(file=str(file), document=document, constants=frozen(document.constants), card=card)


def _reference_faults(reference: str) -> list[Fault]:
    module, _, path = reference.partition(":")
    parts = [*module.split("."), *path.split(".")]
    if reference.count(":") == 1 and all(part.isidentifier() for part in parts):
        return []
    return [Fault(key="python", found=repr(reference), expected='"module:object"')]
