"""Read a load path from its file."""

from __future__ import annotations

from pathlib import Path as FilePath
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import AfterValidator, Field

from drivers.path import MODES, Cycle, Mode, Path, Segment
from drivers.record_file import read_record
from matlib.arrays import BoolArray, FloatArray
from matlib.card_schema import Number, StressUnit, TemperatureUnit, TimeUnit, not_lost
from matlib.documents import Document, validated
from matlib.errors import Fault, FaultyInputError
from matlib.files import read_toml, require_kind, shown
from matlib.tensors import STRAIN_COMPONENTS, STRESS_COMPONENTS, mandel_from_strain, mandel_from_stress
from matlib.units import STRESS, TEMPERATURE, TIME, Unit

__all__ = ["read_path"]

LARGEST_RUN = 200_000_000  # increments

Strain = Annotated[float, Field(ge=-1e3, le=1e3), AfterValidator(not_lost)]
Duration = Annotated[float, Field(ge=0.0, le=1e30, description="a duration >= 0"), AfterValidator(not_lost)]


class UnitsTable(Document):
    """``[units]`` of a path."""

    time: TimeUnit
    temperature: TemperatureUnit
    stress: StressUnit | None = None


class StartTable(Document):
    """``[start]``."""

    temperature: Number = Field(description="the temperature at the start")


class StepTable(Document):
    """What every segment may say."""

    label: Annotated[str, Field(min_length=1, max_length=100)] | None = None
    duration: Duration
    temperature: Number | None = None
    increments: Annotated[int, Field(ge=1, le=10_000_000)] = 100
    spacing: Literal["even", "log"] = "even"


class NamedStep(StepTable):
    """A segment of a named mode: one strain or one stress."""

    strain: Strain | None = None
    stress: Number | None = None


class ComponentStep(StepTable):
    """A segment that names components."""

    strain: dict[Literal["e11", "e22", "e33", "g23", "g13", "g12"], Strain] = Field(default_factory=dict)
    stress: dict[Literal["s11", "s22", "s33", "s23", "s13", "s12"], Number] = Field(default_factory=dict)


class CycleTable(Document):
    """Segments that are repeated."""

    repeat: Annotated[int, Field(ge=1, le=10_000_000)] = Field(description="how often the segments run")
    segments: Annotated[list[dict[str, Any]], Field(min_length=1, max_length=10_000)] = Field(
        description="a list of segments"
    )


class PathDocument(Document):
    """A path file; segments are checked one by one."""

    name: Annotated[str, Field(min_length=1, max_length=200, description="the path's name")]
    note: Annotated[str, Field(max_length=20_000)] = ""
    mode: Literal[
        "uniaxial stress",
        "uniaxial strain",
        "equibiaxial stress",
        "plane strain tension",
        "simple shear",
        "hydrostatic",
        "components",
    ] = Field(description="one of " + ", ".join(MODES))
    units: UnitsTable = Field(description="a table [units] with time and temperature")
    start: StartTable | None = None
    record: str | None = None
    segment: Annotated[list[dict[str, Any]], Field(max_length=100_000)] = Field(default_factory=list)


class _Control:
    """What each component follows, from segment to segment: what a segment leaves out is held."""

    def __init__(self, mode: Mode) -> None:
        self.mode = mode
        self.stress_controlled: BoolArray = np.zeros(6, dtype=np.bool_)
        self.stress_controlled[list(mode.free)] = True
        self.named: set[int] = set(range(6)) if mode.driven else set()

    def targets(self, step: StepTable, stress: Unit | None, key: str) -> tuple[FloatArray, BoolArray]:
        """Targets (Mandel, SI) and what is held, for one segment."""
        strains, stresses = self._given(step)
        faults = []
        if stresses and stress is None:
            expected = "units.stress, since a stress is given"
            faults.append(Fault(key="units.stress", found="nothing", expected=expected, hint="add the key"))
        both = sorted(strains.keys() & stresses.keys())
        if both:
            names = ", ".join(STRAIN_COMPONENTS[c][1:] for c in both)
            faults.append(Fault(key=key, found=f"strain and stress for {names}", expected="one of them"))
        self.named |= strains.keys() | stresses.keys()
        missing = sorted(set(range(6)) - self.named)
        if missing:
            names = ", ".join(STRAIN_COMPONENTS[c][1:] for c in missing)
            expected = "each of the six components in exactly one of strain and stress"
            faults.append(Fault(key=key, found=f"nothing for {names}", expected=expected))
        if faults or (stresses and stress is None):
            raise FaultyInputError(faults)
        strain_row, stress_row = np.zeros(6), np.zeros(6)
        held = np.ones(6, dtype=np.bool_)
        if self.mode.driven:
            held[[c for c in range(6) if c not in self.mode.driven]] = False
        for c, value in strains.items():
            strain_row[c], held[c], self.stress_controlled[c] = value, False, False
        for c, value in stresses.items():
            assert stress is not None
            stress_row[c], held[c], self.stress_controlled[c] = stress.to_si(value), False, True
        return np.where(self.stress_controlled, mandel_from_stress(stress_row), mandel_from_strain(strain_row)), held

    def _given(self, step: StepTable) -> tuple[dict[int, float], dict[int, float]]:
        if isinstance(step, ComponentStep):
            strains = {STRAIN_COMPONENTS.index(name): value for name, value in step.strain.items()}
            return strains, {STRESS_COMPONENTS.index(name): value for name, value in step.stress.items()}
        assert isinstance(step, NamedStep)
        driven = self.mode.driven
        strains = {} if step.strain is None else dict.fromkeys(driven, step.strain)
        return strains, {} if step.stress is None else dict.fromkeys(driven, step.stress)


def _segment(
    data: dict[str, Any], prefix: tuple[str | int, ...], number: int, control: _Control, units: UnitsTable
) -> Segment:
    step = validated(NamedStep if control.mode.driven else ComponentStep, data, prefix)
    key = "segment" + "".join(f"[{p + 1}]" if isinstance(p, int) else f".{p}" for p in prefix[1:])
    stress = None if units.stress is None else STRESS[units.stress]
    targets, held = control.targets(step, stress, key)
    temperature = None
    if step.temperature is not None:
        temperature = TEMPERATURE[units.temperature].to_si(step.temperature)
        if not temperature > 0.0:
            fault = Fault(key=f"{key}.temperature", found=f"{step.temperature:g}", expected="above absolute zero")
            raise FaultyInputError([fault])
    return Segment(
        label=step.label or f"segment {number}",
        durations=np.array([TIME[units.time].to_si(step.duration)]),
        temperatures=None if temperature is None else np.array([temperature]),
        targets=targets[np.newaxis],
        stress_controlled=control.stress_controlled.copy(),
        held=held,
        increments=step.increments,
        spacing=step.spacing,
    )


def _parts(document: PathDocument) -> list[Segment | Cycle]:
    """All segments and cycles; `FaultyInputError` with the faults of all of them."""
    control, faults = _Control(MODES[document.mode]), list[Fault]()
    parts: list[Segment | Cycle] = []
    number = 0
    for k, data in enumerate(document.segment):
        prefix: tuple[str | int, ...] = ("segment", k)
        cyclic = "repeat" in data or "segments" in data
        try:
            inner = [(data, prefix)]
            cycle = None
            if cyclic:
                cycle = validated(CycleTable, data, prefix)
                inner = [(table, (*prefix, "segments", j)) for j, table in enumerate(cycle.segments)]
            segments = []
            for table, where in inner:
                number += 1
                try:
                    segments.append(_segment(table, where, number, control, document.units))
                except FaultyInputError as error:
                    faults += error.faults
            if cycle is None:
                parts += segments
            elif segments:
                parts.append(Cycle(repeat=cycle.repeat, segments=tuple(segments)))
        except FaultyInputError as error:
            faults += error.faults
    if faults:
        raise FaultyInputError(list(dict.fromkeys(faults)))
    return parts


def read_path(file: str | FilePath) -> Path:
    """Read a path file, and the measured record that it may name.

    Parameters
    ----------
    file : str or Path

    Returns
    -------
    Path

    Raises
    ------
    FileError
        With every fault of the file at once.
    """
    data = read_toml(file)
    require_kind(data, "path", str(file))
    try:
        document = validated(PathDocument, data)
        if document.record is not None:
            return _recorded(document, FilePath(file))
        path = _built(document)
    except FaultyInputError as error:
        raise error.in_file(str(file)) from None
    return path


def _built(document: PathDocument) -> Path:
    faults = []
    T_start = 0.0
    if document.start is None:
        faults.append(Fault(key="start", found="nothing", expected="a table [start] with temperature", hint="add it"))
    else:
        T_start = TEMPERATURE[document.units.temperature].to_si(document.start.temperature)
        if not T_start > 0.0:
            found = shown(document.start.temperature)
            faults.append(Fault(key="start.temperature", found=found, expected="above absolute zero"))
    if not document.segment:
        faults.append(Fault(key="segment", found="nothing", expected="at least one [[segment]], or record"))
    try:
        parts = _parts(document)
    except FaultyInputError as error:
        faults += error.faults
    if faults:
        raise FaultyInputError(faults)
    path = Path(name=document.name, mode=MODES[document.mode], start_temperature=T_start, parts=tuple(parts))
    if path.increment_count > LARGEST_RUN:
        found = f"{path.increment_count} increments, repeats counted"
        raise FaultyInputError([Fault(key="segment", found=found, expected=f"at most {LARGEST_RUN}")])
    return path


def _recorded(document: PathDocument, file: FilePath) -> Path:
    """A path from a measured record, which lies beside the path file."""
    assert document.record is not None
    faults = []
    if document.segment:
        faults.append(Fault(key="record", found="segments beside it", expected="either record or segments"))
    if document.start is not None:
        hint = "remove [start]; the record's first row is the start"
        faults.append(Fault(key="start", found="a table beside a record", expected="no such table", hint=hint))
    mode = MODES[document.mode]
    if not mode.driven:
        expected = "a named mode, since a record has one column of it"
        faults.append(Fault(key="mode", found=shown(mode.name), expected=expected))
    if faults:
        raise FaultyInputError(faults)
    record = read_record(
        file.parent / document.record,
        time=TIME[document.units.time],
        temperature=TEMPERATURE[document.units.temperature],
        stress=None if document.units.stress is None else STRESS[document.units.stress],
    )
    stress_controlled = np.zeros(6, dtype=np.bool_)
    stress_controlled[list(mode.free)] = True
    stress_controlled[list(mode.driven)] = record.is_stress
    rows = np.zeros((record.time.size, 6))
    rows[:, list(mode.driven)] = record.value[:, np.newaxis]
    to_mandel = mandel_from_stress if record.is_stress else mandel_from_strain
    # The first row is a jump from the unloaded start to the record's first value.
    segment = Segment(
        label="record",
        durations=np.diff(record.time, prepend=record.time[0]),
        temperatures=record.temperature,
        targets=to_mandel(rows),
        stress_controlled=stress_controlled,
        held=np.zeros(6, dtype=np.bool_),
        increments=1,
    )
    return Path(name=document.name, mode=mode, start_temperature=float(record.temperature[0]), parts=(segment,))
