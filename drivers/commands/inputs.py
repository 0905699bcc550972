"""Reading what a command was given: all files, with all their faults at once."""

from __future__ import annotations

from drivers.subject import read_subject
from matlib.files import gather, read_all

__all__ = ["gather", "read_all", "read_subject"]
