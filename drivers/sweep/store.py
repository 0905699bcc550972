"""Results in one SQLite file: each finished case committed, nothing computed twice."""

from __future__ import annotations

import fcntl
import os
import sqlite3
import time
from collections.abc import Iterable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from types import TracebackType
from typing import IO, Any

from drivers.sweep.plan import Case
from drivers.sweep.run_case import Outcome
from matlib.errors import CardproofError, Fault, FileError

__all__ = ["COLUMNS", "BusyError", "Store"]

PATIENCE = 2.0
"""Seconds for a sweep that was just killed to be gone."""

READERS = 20.0
"""Seconds for another program that has locked the file to let go of it."""

MARK, LAYOUT = 0x43505357, 1
"""What SQLite keeps in the head of the file: that it is a sweep's, and which columns it has."""

RESULTS = (
    "peak_stress",
    "end_stress",
    "relative_error",
    "reference_bound",
    "estimated",
    "increments",
    "seconds",
    "error",
)
COLUMNS = ("key", "card", "path", "shift_rule", "recursion", "sample", *RESULTS)

SCHEMA = """
CREATE TABLE cases (
  key TEXT PRIMARY KEY, card TEXT NOT NULL, path TEXT NOT NULL, shift_rule TEXT NOT NULL, recursion TEXT NOT NULL,
  sample INTEGER NOT NULL, peak_stress REAL, end_stress REAL, relative_error REAL, reference_bound REAL,
  estimated INTEGER, increments INTEGER, seconds REAL, error TEXT, computed INTEGER NOT NULL DEFAULT 1
)
"""

ADD = (
    f"INSERT INTO cases ({', '.join(COLUMNS)}) VALUES ({', '.join('?' * len(COLUMNS))}) ON CONFLICT (key) DO UPDATE SET "
    + ", ".join(f"{name} = excluded.{name}" for name in RESULTS)
    + ", computed = computed + 1"
)


class BusyError(CardproofError, RuntimeError):
    """Another sweep is writing to the same database."""

    def __init__(self, database: str) -> None:
        super().__init__(database)
        self.database = database

    def __str__(self) -> str:
        return f"{self.database}: another sweep is writing to it; wait for it to end, or name another database"


class Store:
    """The result table of a sweep, held by one sweep at a time; a context that closes it.

    Parameters
    ----------
    database : Path
        Made where it is not there.

    Raises
    ------
    BusyError
        If another process holds it.
    FileError
        If it is no database of a sweep, or cannot be written.
    """

    def __init__(self, database: Path) -> None:
        self.database = database
        self._lock = self._held()
        try:
            with self._told():
                self._connection = sqlite3.connect(database, timeout=READERS, isolation_level=None)
                self._prepare()
        except BaseException:
            self.close()
            raise

    def __enter__(self) -> Store:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def _held(self) -> IO[bytes]:
        """The lock: a file beside the database; it goes with the process that holds it, never with a child of that process."""
        name = f"{self.database}.lock"
        deadline = time.monotonic() + PATIENCE
        while True:
            try:
                lock = open(name, "wb")  # noqa: SIM115 - closed by `close`
            except OSError as error:
                raise self._fault(error.strerror or str(error), "a folder that can be written") from None
            try:
                fcntl.lockf(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
                if os.path.exists(name) and os.path.samestat(os.fstat(lock.fileno()), os.stat(name)):
                    return lock
            except OSError:
                if time.monotonic() > deadline:
                    lock.close()
                    raise BusyError(str(self.database)) from None
            lock.close()  # taken, or removed by the sweep that had it
            time.sleep(0.05)

    def _prepare(self) -> None:
        run = self._connection.execute
        if run("SELECT COUNT(*) FROM sqlite_master").fetchone()[0] == 0:
            run(f"PRAGMA application_id = {MARK}")
            run(f"PRAGMA user_version = {LAYOUT}")
            run("PRAGMA journal_mode = WAL")
            run(SCHEMA)
        found = (run("PRAGMA application_id").fetchone()[0], run("PRAGMA user_version").fetchone()[0])
        if found != (MARK, LAYOUT):
            raise self._fault("an SQLite file of something else", "one of a sweep, or none yet")
        run("PRAGMA synchronous = NORMAL")
        run(f"SELECT {', '.join(COLUMNS)}, computed FROM cases LIMIT 1")
        run("BEGIN IMMEDIATE")  # can it be written?
        run(f"PRAGMA user_version = {LAYOUT}")
        run("COMMIT")

    def _fault(self, found: str, expected: str) -> FileError:
        return FileError(str(self.database), [Fault(key="database", found=found, expected=expected)])

    @contextmanager
    def _told(self) -> Iterator[None]:
        """Whatever SQLite complains about, as a fault of the file."""
        try:
            yield
        except sqlite3.Error as error:
            raise self._fault(str(error), "an SQLite file of a sweep that can be written, or none yet") from None

    def close(self) -> None:
        """Close the file, and let go of it."""
        with suppress(AttributeError, sqlite3.Error):
            self._connection.close()
        if not self._lock.closed:
            Path(self._lock.name).unlink(missing_ok=True)
            self._lock.close()

    def finished(self, *, failed_too: bool = True) -> set[str]:
        """Keys of the cases that need no run."""
        condition = "" if failed_too else " WHERE error IS NULL"
        with self._told():
            return {key for (key,) in self._connection.execute(f"SELECT key FROM cases{condition}")}

    def add(self, case: Case, outcome: Outcome) -> None:
        """Commit one case. A second outcome of the same case replaces a failed one, and counts that it was computed again."""
        values = [case.key, case.card, case.path, case.rule.shift_rule, case.rule.recursion, case.sample]
        row = outcome.row()
        with self._told():
            self._connection.execute(ADD, [*values, *(row[name] for name in RESULTS)])

    def rows(self, keys: Iterable[str]) -> Iterator[dict[str, Any]]:
        """Rows of these cases, in the given order."""
        with self._told():
            found = {
                row[0]: row for row in self._connection.execute(f"SELECT {', '.join(COLUMNS)}, computed FROM cases")
            }
        names = (*COLUMNS, "computed")
        return (dict(zip(names, found[key], strict=True)) for key in keys if key in found)
