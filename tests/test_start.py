"""How a command starts: what it loads, and what it leaves alone."""

import os
import subprocess
import sys

import pytest

from drivers.demo import __path__ as demo_folders

CARD = f"{demo_folders[0]}/laboratory.card.toml"
LOADED = """
import sys
from drivers.__main__ import main
sys.argv = ["cardproof", *sys.argv[1:]]
status = main()
print(*sys.modules, file=sys.stderr)
sys.exit(status)
"""
HEAVY = ("numba", "scipy", "matplotlib", "jinja2", "sqlite3", "distributed")


def loaded(*arguments: str) -> set[str]:
    done = subprocess.run([sys.executable, "-c", LOADED, *arguments], capture_output=True, text=True, timeout=60)
    assert done.returncode == 0, done.stderr
    return set(done.stderr.split())


@pytest.mark.parametrize(
    "arguments",
    [["check", CARD], ["convert", CARD, "--to", "vft", "--reference", "25degC", "-o", "new.card.toml"], ["--version"]],
    ids=lambda arguments: arguments[0],
)
def test_a_quick_command_loads_nothing_heavy(arguments, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    modules = loaded(*arguments)
    assert "drivers.cli" in modules
    assert modules.isdisjoint(HEAVY)


def test_the_command_is_run_as_a_module_too():
    for name in ("drivers", "drivers.cli"):
        done = subprocess.run(
            [sys.executable, "-m", name, "--version"], capture_output=True, text=True, timeout=60, env=os.environ
        )
        assert (done.returncode, done.stdout.split()[0]) == (0, "cardproof")


def test_other_commands_are_known_where_one_is_asked_for():
    done = subprocess.run([sys.executable, "-m", "drivers", "chekc"], capture_output=True, text=True, timeout=60)
    assert done.returncode == 2
    assert "Did you mean 'check'?" in done.stderr
