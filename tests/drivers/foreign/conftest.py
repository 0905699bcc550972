"""Routines to drive, built once."""

from __future__ import annotations

import shutil
import subprocess
from collections.abc import Callable, Iterator
from contextlib import ExitStack
from pathlib import Path

import pytest

from drivers.foreign.foreign import ForeignRoutine
from tests.drivers.foreign import faults

DEMO = Path(__file__).parents[3] / "drivers" / "demo"


@pytest.fixture(scope="session")
def faulty_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The faulty routines."""
    folder = tmp_path_factory.mktemp("faulty")
    (folder / "faulty.c").write_text(faults.C)
    (folder / "faulty.py").write_text(faults.PYTHON)
    faults.build(folder / "faulty.c", folder / "libfaulty.so", "-w")
    return folder


@pytest.fixture(scope="session")
def examples(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The examples as they are shipped, those in C and, where there is a compiler, in Fortran built."""
    folder = tmp_path_factory.mktemp("examples")
    for file in DEMO.iterdir():
        if file.is_file():
            shutil.copy(file, folder)
    faults.build(folder / "routine.c", folder / "routine-c.so", "-O2", "-Wall", "-Wextra", "-Werror")
    if shutil.which("gfortran"):
        command = ["gfortran", "-O2", "-shared", "-fPIC", "-Wall", "-Werror", "-o", "routine-f90.so", "routine.f90"]
        subprocess.run(command, check=True, timeout=60, cwd=folder)
    return folder


@pytest.fixture
def faulty(faulty_folder: Path, tmp_path: Path) -> Iterator[Callable[..., ForeignRoutine]]:
    """Opens a faulty routine, in C unless told otherwise; keys of the routine file may be added or changed."""
    with ExitStack() as stack:

        def opened(*, python: str = "", **keys: object) -> ForeignRoutine:
            table: dict[str, object] = {"constants": [1e9, 0.0], "time_limit": 0.25}
            table |= {"python": f"faulty:{python}"} if python else {"library": "libfaulty.so", "n_memory": 3}
            text = "".join(f"{key} = {str(value) if isinstance(value, float | int | list) else repr(value)}\n"
                           for key, value in (table | keys).items())  # fmt: skip
            name = f"{tmp_path.name}-{len(list(faulty_folder.iterdir()))}.routine.toml"
            (faulty_folder / name).write_text(text)
            return stack.enter_context(ForeignRoutine(faulty_folder / name))

        yield opened
