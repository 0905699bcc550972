"""What a baseline file may hold, key by key. SI units; tensors by components, targets of a path in Mandel form."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field

from matlib.documents import Document

__all__ = ["FORMAT", "SCHEMA", "BaselineDocument", "CycleTable", "PathTable", "ResponseTable", "SegmentTable"]

FORMAT = "cardproof baseline"
SCHEMA = 1

Flags = Annotated[list[bool], Field(min_length=6, max_length=6)]
Six = Annotated[list[float], Field(min_length=6, max_length=6)]
Column = list[float]


class SegmentTable(Document):
    """One segment, exactly as the path holds it."""

    label: str
    durations: Annotated[Column, Field(min_length=1)]
    temperatures: Column | None
    targets: list[Six]
    stress_controlled: Flags
    held: Flags
    increments: int
    spacing: Literal["even", "log"]


class CycleTable(Document):
    """Segments that are repeated."""

    repeat: int
    segments: list[SegmentTable]


class PathTable(Document):
    """A whole path."""

    name: str
    mode: str
    start_temperature: float
    parts: list[SegmentTable | CycleTable]


class ResponseTable(Document):
    """The accepted response at the probe points of a path."""

    increments: list[Annotated[int, Field(ge=1)]]
    rows: list[Annotated[int, Field(ge=0)]]
    segment: list[str]
    time: Column
    temperature: Column
    strain: dict[Literal["e11", "e22", "e33", "g23", "g13", "g12"], Column]
    stress: dict[Literal["s11", "s22", "s33", "s23", "s13", "s12"], Column]
    strain_bound: Column
    stress_bound: Column
    estimated: bool


class RecordedTable(Document):
    """One path with its tolerance and response."""

    path: PathTable
    tolerance: Annotated[float, Field(gt=0.0)]
    response: ResponseTable


class BaselineDocument(Document):
    """A baseline file."""

    format: Literal["cardproof baseline"]
    schema_number: int = Field(alias="schema")
    version: str
    card: dict[str, Any]
    paths: Annotated[list[RecordedTable], Field(min_length=1)]
    digest: str
