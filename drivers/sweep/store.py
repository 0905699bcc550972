"""Results in one SQLite file: each finished case committed, nothing computed twice."""

from __future__ import annotations

import csv
import fcntl
import io
import sqlite3
import time
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from drivers.sweep.plan import Case
from drivers.sweep.run_case import Outcome
from matlib.errors import CardproofError, Fault, FileError

__all__ = ["BusyError", "Store"]

PATIENCE = 10.0
"""Seconds to wait for the workers of a sweep that was killed to notice and end."""

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
CREATE TABLE IF NOT EXISTS cases (
  key TEXT PRIMARY KEY, card TEXT NOT NULL, path TEXT NOT NULL, shift_rule TEXT NOT NULL, recursion TEXT NOT NULL,
  sample INTEGER NOT NULL, peak_stress REAL, end_stress REAL, relative_error REAL, reference_bound REAL,
  estimated INTEGER, increments INTEGER, seconds REAL, error TEXT, computed INTEGER NOT NULL DEFAULT 1
);
"""


class BusyError(CardproofError, RuntimeError):
    """Another sweep is writing to the same database."""

    def __init__(self, database: str) -> None:
        super().__init__(database)
        self.database = database

    def __str__(self) -> str:
        return f"{self.database}: another sweep is writing to it; wait for it to end, or name another database"


class Store:
    """The result table of a sweep.

    Parameters
    ----------
    database : Path
        Made where it is not there.
    """

    def __init__(self, database: Path) -> None:
        self.database = database
        try:
            self.connection = sqlite3.connect(database, timeout=60.0, isolation_level=None)
            self.connection.execute("PRAGMA journal_mode=WAL")
            self.connection.execute("PRAGMA synchronous=NORMAL")
            self.connection.executescript(SCHEMA)
            self.connection.execute(f"SELECT {', '.join(COLUMNS)}, computed FROM cases LIMIT 1")
        except sqlite3.Error as error:
            raise FileError(
                str(database),
                [Fault(key="database", found=str(error), expected="an SQLite file of a sweep, or none yet")],
            ) from None

    def close(self) -> None:
        """Close the file."""
        self.connection.close()

    def finished(self, *, failed_too: bool = True) -> set[str]:
        """Keys of the cases that need no run."""
        condition = "" if failed_too else " WHERE error IS NULL"
        return {key for (key,) in self.connection.execute(f"SELECT key FROM cases{condition}")}

    def add(self, case: Case, outcome: Outcome) -> None:
        """Commit one case. A second outcome of the same case replaces a failed one, and counts that it was computed again."""
        values = [case.key, case.card, case.path, case.rule.shift_rule, case.rule.recursion, case.sample]
        row = outcome.row()
        values += [row[name] for name in RESULTS]
        marks = ", ".join("?" * len(COLUMNS))
        updates = ", ".join(f"{name} = excluded.{name}" for name in RESULTS)
        self.connection.execute(
            f"INSERT INTO cases ({', '.join(COLUMNS)}) VALUES ({marks}) "
            f"ON CONFLICT (key) DO UPDATE SET {updates}, computed = computed + 1",
            values,
        )

    def rows(self, keys: Iterable[str]) -> Iterator[dict[str, Any]]:
        """Rows of these cases, in the given order."""
        found = {
            row[0]: dict(zip((*COLUMNS, "computed"), row, strict=True))
            for row in self.connection.execute(f"SELECT {', '.join(COLUMNS)}, computed FROM cases")
        }
        return (found[key] for key in keys if key in found)

    @contextmanager
    def owned(self) -> Iterator[None]:
        """Hold the database for one sweep at a time. Workers inherit the hold: it ends with the last of them."""
        with open(f"{self.database}.lock", "w") as lock:
            deadline = time.monotonic() + PATIENCE
            while True:
                try:
                    fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
                    break
                except OSError:
                    if time.monotonic() > deadline:
                        raise BusyError(str(self.database)) from None
                    time.sleep(0.1)
            yield


def csv_of(rows: Iterable[dict[str, Any]]) -> str:
    """Result rows as CSV, without the internal key."""
    names = COLUMNS[1:]
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(names)
    writer.writerows([["" if row[name] is None else row[name] for name in names] for row in rows])
    return buffer.getvalue()


def parquet_of(rows: Iterable[dict[str, Any]]) -> bytes:
    """Result rows as Parquet; needs the optional extra ``parquet``."""
    import pyarrow as arrow
    import pyarrow.parquet as parquet

    listed = list(rows)
    types = {"sample": arrow.int64(), "increments": arrow.int64(), "estimated": arrow.bool_()}
    texts = ("card", "path", "shift_rule", "recursion", "error")
    columns = {}
    for name in COLUMNS[1:]:
        kind = types.get(name, arrow.string() if name in texts else arrow.float64())
        values = [row[name] for row in listed]
        if name == "estimated":
            values = [None if value is None else bool(value) for value in values]
        columns[name] = arrow.array(values, kind)
    buffer = io.BytesIO()
    parquet.write_table(arrow.table(columns), buffer)
    return buffer.getvalue()
