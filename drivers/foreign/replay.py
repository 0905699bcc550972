"""A failing increment as a file, and that one increment taken once more."""

from __future__ import annotations

import json
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Literal

import numpy as np
from pydantic import Field

from drivers.foreign.failure import KINDS, RoutineFailureError
from drivers.foreign.foreign import ForeignRoutine
from drivers.foreign.routine_file import SUFFIX
from matlib.arrays import FloatArray, frozen
from matlib.documents import Document, validated
from matlib.errors import Fault, FaultyInputError, FileError
from matlib.files import read_text, shown_text, write_atomically
from matlib.routine import Increment, Update

__all__ = ["Replay", "ReplayResult", "read_replay", "replay", "replay_name", "save_replay"]

FORMAT = "cardproof replay 1"

Pair = Annotated[list[float], Field(min_length=2, max_length=2)]
Six = Annotated[list[float], Field(min_length=6, max_length=6)]


class IncrementTable(Document):
    """An increment: SI units, strains in Mandel form."""

    time: float
    duration: Annotated[float, Field(ge=0.0)]
    temperature: Pair
    strain: Annotated[list[Six], Field(min_length=2, max_length=2)]


class ReplayDocument(Document):
    """A replay file."""

    format: Literal["cardproof replay 1"]
    routine: Annotated[str, Field(min_length=1, description="the routine file, named from the folder of this file")]
    kind: Annotated[str, Field(description="one of " + ", ".join(KINDS))]
    detail: str = ""
    increment: IncrementTable
    memory: list[float]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Replay:
    """A failure as it was saved.

    Parameters
    ----------
    file : str
    routine_file : str
        Of the routine that failed.
    kind, detail : str
        What happened.
    increment : Increment
    memory : ndarray, shape (memory_size,)
    """

    file: str
    routine_file: str
    kind: str
    detail: str
    increment: Increment
    memory: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ReplayResult:
    """What the increment gives now: a failure, or an update; one of the two is None."""

    replay: Replay
    failure: RoutineFailureError | None
    update: Update | None

    @property
    def reproduced(self) -> bool:
        """Whether it fails as it did."""
        return self.failure is not None and self.failure.kind == self.replay.kind


def replay_name(routine_file: str) -> str:
    """Name that a replay file of a routine gets: beside nothing, in the folder that the command runs in.

    Examples
    --------
    >>> replay_name("build/new.routine.toml")
    'new.replay.json'
    """
    return f"{Path(routine_file).name.removesuffix(SUFFIX)}.replay.json"


def save_replay(error: RoutineFailureError, file: str | Path) -> bool:
    """Write a failing increment; False, and nothing written, where no increment is known.

    Raises
    ------
    FileError
        If the file cannot be written.
    """
    increment, memory = error.increment, error.memory
    if increment is None or memory is None or not np.isfinite(memory).all():
        return False
    document = {
        "format": FORMAT,
        "routine": os.path.relpath(Path(error.routine).resolve(), Path(file).resolve().parent),
        "kind": error.kind,
        "detail": error.detail,
        "increment": {
            "time": increment.time,
            "duration": increment.duration,
            "temperature": list(increment.temperature),
            "strain": [strain.tolist() for strain in increment.strain],
        },
        "memory": memory.tolist(),
    }
    write_atomically(file, json.dumps(document, indent=1, allow_nan=False) + "\n")
    return True


def read_replay(file: str | Path) -> Replay:
    """Read a replay file; `FileError` where it is none."""
    try:
        data = json.loads(read_text(file))
    except (ValueError, RecursionError) as error:
        if isinstance(error, FileError):
            raise
        fault = Fault(key="file", found=shown_text(str(error)), expected="valid JSON")
        raise FileError(str(file), [fault]) from None
    try:
        document = validated(ReplayDocument, data)
    except FaultyInputError as error:
        raise error.in_file(str(file)) from None
    table = document.increment
    return Replay(
        file=str(file),
        routine_file=os.path.normpath(Path(file).parent / document.routine),
        kind=document.kind,
        detail=document.detail,
        increment=Increment(
            time=table.time,
            duration=table.duration,
            temperature=(table.temperature[0], table.temperature[1]),
            strain=(frozen(table.strain[0]), frozen(table.strain[1])),
        ),
        memory=frozen(document.memory),
    )


def replay(file: str | Path) -> ReplayResult:
    """Take the increment of a replay file once more, in a new process.

    Raises
    ------
    FileError
        If the replay file, or the routine file that it names, has a fault.
    """
    saved = read_replay(file)
    with ForeignRoutine(saved.routine_file) as routine:
        if saved.memory.size != routine.memory_size:
            fault = Fault(
                key="memory",
                found=f"{saved.memory.size} numbers",
                expected=f"{routine.memory_size}, as the routine has",
            )
            raise FileError(str(file), [fault])
        try:
            update = routine.update(saved.increment, saved.memory)
        except RoutineFailureError as failure:
            return ReplayResult(replay=saved, failure=failure, update=None)
    return ReplayResult(replay=saved, failure=None, update=update)
