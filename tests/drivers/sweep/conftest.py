"""Sweeps in real processes: folders of cards and paths, runs of the command, and what they left in the database."""

from __future__ import annotations

import os
import signal
import sqlite3
import subprocess
import sys
import time
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest

from drivers.cli import main
from tests.drivers.files import CARD, PATH, SOFTER

RULES = '[{ shift_rule = "integrated" }, { shift_rule = "middle", recursion = "midpoint" }]'
SHORT = PATH.partition("[[segment]]\nrepeat")[0]  # the pull and the dwell
WARM = SHORT.replace('"pull, dwell, quench"', '"heated"').replace("strain = 0.01", "strain = 0.01\ntemperature = 90.0")


def sweep_text(
    *, samples: int = 0, deviation: str = '"shift.C1" = 0.2', more: str = "", tolerance: float = 0.05
) -> str:
    """A sweep of two cards on two paths by two rules."""
    text = f"""name = "library [x]"
[cases]
cards = ["cards/*.card.toml"]
paths = ["*.path.toml"]
rules = {RULES}
tolerance = {tolerance}
"""
    if samples:
        text += f"[samples]\ncount = {samples}\nseed = 7\n[samples.deviation]\n{deviation}\n"
    return text + more


class Folder:
    """A folder with a sweep file and all that it names."""

    def __init__(self, place: Path, **changes: object) -> None:
        self.place = place
        (place / "cards").mkdir(parents=True)
        (place / "cards" / "a.card.toml").write_text(CARD)
        (place / "cards" / "b.card.toml").write_text(SOFTER)
        (place / "p.path.toml").write_text(SHORT)
        (place / "q.path.toml").write_text(WARM)
        self.file, self.database = place / "s.sweep.toml", place / "sweep.sqlite"
        self.file.write_text(sweep_text(**changes))  # type: ignore[arg-type]

    def start(self, *options: str) -> subprocess.Popen[str]:
        """The command in a session of its own."""
        command = [sys.executable, "-m", "drivers.cli", "sweep", str(self.file), *options]
        pipe = subprocess.PIPE
        return subprocess.Popen(command, stdout=pipe, stderr=pipe, text=True, start_new_session=True, cwd=self.place)

    def run(self, *options: str) -> tuple[int, str, str]:
        """The command to its end: status, standard output, standard error."""
        process = self.start(*options)
        out, err = process.communicate(timeout=600)
        return process.returncode, out, err

    def query(self, text: str) -> list[tuple]:
        """Rows of a query; none where there is no table yet."""
        try:
            with closing(sqlite3.connect(f"file:{self.database}?mode=ro", uri=True, timeout=60)) as connection:
                return connection.execute(text).fetchall()
        except sqlite3.OperationalError:
            return []

    def count(self) -> int:
        rows = self.query("SELECT COUNT(*) FROM cases")
        return rows[0][0] if rows else 0

    def table(self) -> dict[str, tuple]:
        """Everything but the time that it took, by key."""
        names = "key, card, path, shift_rule, recursion, sample, peak_stress, end_stress, relative_error"
        rest = "reference_bound, estimated, increments, error, computed"
        return {row[0]: row[1:] for row in self.query(f"SELECT {names}, {rest} FROM cases")}

    def seconds(self) -> dict[str, float]:
        """The time that each case took: another number where it was run again."""
        return dict(self.query("SELECT key, seconds FROM cases"))

    def await_count(self, count: int, process: subprocess.Popen[str]) -> bool:
        """Wait until so many cases are committed; False where the process ends before."""
        while process.poll() is None:
            if self.count() >= count:
                return True
            time.sleep(0.002)
        return False


def members(session: int) -> list[int]:
    """Living processes of a session."""
    found = []
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                fields = (entry / "stat").read_text().rpartition(")")[2].split()
            except OSError:
                continue
            if int(fields[3]) == session and fields[0] != "Z":
                found.append(int(entry.name))
    return found


def assert_gone(session: int, patience: float = 10.0) -> None:
    """Every process of a session ends by itself; the patience is for a busy machine."""
    deadline = time.monotonic() + patience
    while members(session):
        assert time.monotonic() < deadline, f"left behind: {members(session)}"
        time.sleep(0.01)


def kill(process: subprocess.Popen[str], *, group: bool) -> None:
    """``kill -9`` of a process alone, or of its whole group."""
    if group:
        os.killpg(process.pid, signal.SIGKILL)
    else:
        os.kill(process.pid, signal.SIGKILL)
    process.communicate()


@pytest.fixture
def folder(tmp_path) -> Callable[..., Folder]:
    """Makes folders, each with a sweep of its own."""
    count = 0

    def made(**changes: object) -> Folder:
        nonlocal count
        count += 1
        return Folder(tmp_path / f"f{count}", **changes)

    return made


@pytest.fixture
def sweep(capsys):
    """The command in this process: status, standard output, standard error."""

    def of(folder: Folder, *options: str) -> tuple[int, str, str]:
        status = main(["sweep", str(folder.file), "--processes", "2", *options])
        return (status, *capsys.readouterr())

    return of
