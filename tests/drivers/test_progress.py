"""Progress: on a terminal only, after a second only, whatever the name."""

import io
import sys

import pytest

from drivers.report import progress as module
from drivers.report.progress import progress


class Terminal(io.StringIO):
    """Standard error that somebody looks at."""

    def isatty(self) -> bool:
        return True


def test_nobody_is_told_where_nobody_looks(monkeypatch):
    monkeypatch.setattr(sys, "stderr", io.StringIO())
    with progress("driving", 10) as advance:
        assert advance is None
    assert sys.stderr.getvalue() == ""


def test_a_quick_run_shows_nothing(monkeypatch):
    monkeypatch.setattr(sys, "stderr", Terminal())
    with progress("driving", 10) as advance:
        assert advance is not None
        advance(10)
    assert sys.stderr.getvalue() == ""


@pytest.mark.parametrize("name", ["thermal cycle", "odd [/name] [b]"])
def test_a_long_run_shows_what_goes_on_and_clears_it(monkeypatch, name):
    monkeypatch.setattr(sys, "stderr", Terminal())
    monkeypatch.setattr(module, "PATIENCE", 0.0)
    monkeypatch.setenv("TERM", "xterm")
    with progress(f"driving {name}", 10) as advance:
        assert advance is not None
        advance(4)
        advance(6)
    assert name in sys.stderr.getvalue()


def test_a_run_that_fails_leaves_no_bar_behind(monkeypatch):
    monkeypatch.setattr(sys, "stderr", Terminal())
    monkeypatch.setattr(module, "PATIENCE", 0.0)
    with pytest.raises(RuntimeError, match="broken"), progress("driving", 10) as advance:
        assert advance is not None
        advance(1)
        raise RuntimeError("broken")
    assert sys.stderr.getvalue().endswith(("\x1b[?25h", "\x1b[2K"))  # the cursor is shown again, the line is cleared
