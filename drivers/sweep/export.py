"""Result rows as files for other programs."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from typing import Any

from drivers.sweep.store import COLUMNS

__all__ = ["csv_of", "parquet_of"]

NAMES = COLUMNS[1:]
"""The columns but the internal key."""


def csv_of(rows: Iterable[dict[str, Any]]) -> str:
    """Rows as CSV, a header first; what a case does not have is empty."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(NAMES)
    writer.writerows([["" if row[name] is None else row[name] for name in NAMES] for row in rows])
    return buffer.getvalue()


def parquet_of(rows: Iterable[dict[str, Any]]) -> bytes:
    """Rows as Parquet; needs the optional extra ``parquet``."""
    import pyarrow as arrow
    import pyarrow.parquet as parquet

    listed = list(rows)
    types = {"sample": arrow.int64(), "increments": arrow.int64(), "estimated": arrow.bool_()}
    texts = ("card", "path", "shift_rule", "recursion", "error")
    columns = {}
    for name in NAMES:
        kind = types.get(name, arrow.string() if name in texts else arrow.float64())
        values = [row[name] for row in listed]
        if name == "estimated":
            values = [None if value is None else bool(value) for value in values]
        columns[name] = arrow.array(values, kind)
    buffer = io.BytesIO()
    parquet.write_table(arrow.table(columns), buffer)
    return buffer.getvalue()
