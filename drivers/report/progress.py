"""Progress of anything that takes over a second, on a terminal only."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rich.progress import Progress, TaskID

__all__ = ["progress"]

PATIENCE = 1.0  # s


class _Bar:
    """A bar that appears once a second has passed."""

    def __init__(self, what: str, total: int) -> None:
        self.what, self.total, self.done = what, total, 0
        self.started = time.monotonic()
        self.bar: Progress | None = None
        self.task: TaskID | None = None

    def advance(self, steps: int) -> None:
        self.done += steps
        if self.bar is None:
            if time.monotonic() - self.started < PATIENCE:
                return
            from rich.console import Console
            from rich.markup import escape
            from rich.progress import Progress

            self.bar = Progress(console=Console(stderr=True), transient=True)
            self.task = self.bar.add_task(escape(self.what), total=self.total)
            self.bar.start()
        assert self.task is not None
        self.bar.update(self.task, completed=self.done)

    def close(self) -> None:
        if self.bar is not None:
            self.bar.stop()


@contextmanager
def progress(what: str, total: int) -> Iterator[Callable[[int], None] | None]:
    """Show progress on standard error where that is a terminal.

    Parameters
    ----------
    what : str
        What goes on, in words.
    total : int
        Steps in all.

    Yields
    ------
    advance : callable or None
        To be called with the steps done since the last call; None where there is nobody to look.
    """
    if not sys.stderr.isatty():
        yield None
        return
    bar = _Bar(what, total)
    try:
        yield bar.advance
    finally:
        bar.close()
