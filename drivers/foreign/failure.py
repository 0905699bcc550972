"""How a foreign routine fails."""

from __future__ import annotations

from typing import Literal, get_args

from matlib.arrays import FloatArray
from matlib.errors import CardproofError, both_scales
from matlib.routine import Increment

__all__ = ["KINDS", "FailureKind", "RoutineFailureError"]

FailureKind = Literal[
    "crash", "hang", "code", "not-finite", "out-of-bounds", "input-changed", "exception", "wrong-shape"
]
KINDS: tuple[str, ...] = get_args(FailureKind)


class RoutineFailureError(CardproofError, RuntimeError):
    """A foreign routine that gave no answer, or none that can be used.

    Parameters
    ----------
    routine : str
        Its routine file, as the user named it.
    kind : str
        One of `KINDS`.
    detail : str
        What happened, in words.
    increment : Increment or None
        The increment that caused it; None where it happened outside any.
    memory : ndarray or None
        What the point remembered at the start of `increment`.
    """

    def __init__(
        self,
        routine: str,
        kind: str,
        detail: str,
        increment: Increment | None = None,
        memory: FloatArray | None = None,
    ) -> None:
        super().__init__(routine, kind, detail, increment, memory)
        self.routine = routine
        self.kind = kind
        self.detail = detail
        self.increment = increment
        self.memory = memory

    def __str__(self) -> str:
        if self.increment is None:
            return f"{self.routine}: {self.kind}: {self.detail}"
        start, end = self.increment.temperature
        where = f"the increment of {self.increment.duration:g} s that starts at {self.increment.time:g} s"
        span = both_scales(start) if start == end else f"{both_scales(start)} to {both_scales(end)}"
        return f"{self.routine}: {self.kind} in {where}, {span}: {self.detail}"
