"""Help, examples, completion, and what the terminal shows at every width."""

import contextlib
import io
import os
import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest
import typer

from drivers.cli import app, main
from matlib.version import __version__

COMMANDS = typer.main.get_command(app).commands
EXAMPLES = {name: command.epilog.splitlines()[-1] for name, command in COMMANDS.items()}
OUTCOME = {"compare": 1, "verify": 1}
"""Examples that show a card falling short."""
SLOW = ("steps", "sweep", "audit", "compare")
NO_COLOUR = re.compile(r"\x1b\[")


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    """What `cardproof demo` said at 60 columns; the working folder holds its files."""
    before, said = Path.cwd(), io.StringIO()
    os.chdir(tmp_path_factory.mktemp("here"))
    with pytest.MonkeyPatch.context() as patch, contextlib.redirect_stdout(said):
        patch.setenv("COLUMNS", "60")
        assert main(shlex.split(EXAMPLES["demo"])[1:]) == 0
    yield said.getvalue()
    os.chdir(before)


def assert_fits(text: str, width: int) -> None:
    assert max(map(len, text.splitlines())) <= width
    assert text.isascii()
    assert not NO_COLOUR.search(text)


def run(*arguments: str, **environment: str) -> subprocess.CompletedProcess[bytes]:
    script = "import sys; from drivers.cli import main; sys.exit(main())"
    command = [sys.executable, "-c", script, *arguments]
    return subprocess.run(command, capture_output=True, timeout=120, check=False, env={**os.environ, **environment})


@pytest.mark.parametrize("name", EXAMPLES)
def test_every_command_has_an_example_on_one_line_of_its_help(name, capsys):
    assert main([name, "--help"]) == 0
    lines = [line.strip() for line in capsys.readouterr().out.splitlines()]
    assert EXAMPLES[name].startswith(f"cardproof {name}")
    assert EXAMPLES[name] in lines


def test_the_demonstration_fits_the_terminal(demo):
    assert_fits(demo, 60)
    assert "The report is cardproof-demo/report.html." in demo


@pytest.mark.parametrize(
    ("name", "width"),
    [
        (name, width)
        for name in EXAMPLES
        if name != "demo"
        for width in ([60] if name in SLOW else [60, 80, 200])  # slow ones take seconds; their tables are made alike
    ],
)
def test_every_example_runs_and_fits_the_terminal(demo, name, width, monkeypatch, capsys):
    monkeypatch.setenv("COLUMNS", str(width))
    assert main(shlex.split(EXAMPLES[name])[1:]) == OUTCOME.get(name, 0)
    found = capsys.readouterr()
    assert found.err == ""
    assert_fits(found.out, width)
    assert found.out.partition(":")[0] in ("holds", "falls short", "exact") or name == "drive"


def test_no_colour_is_obeyed_and_colour_shows_on_a_terminal_alone(demo):
    card = "cardproof-demo/laboratory.card.toml"
    plain, forced = run("check", card), run("check", card, FORCE_COLOR="1")
    refused = run("check", card, FORCE_COLOR="1", NO_COLOR="1")
    assert b"\x1b[" not in plain.stdout
    assert b"\x1b[32m" in forced.stdout or b"\x1b[1;32m" in forced.stdout
    assert not re.search(rb"\x1b\[[0-9;]*3[0-9]", refused.stdout)


def test_a_terminal_that_knows_ascii_alone_is_spoken_to_in_ascii(demo):
    source = Path("cardproof-demo/laboratory.card.toml").read_text(encoding="utf-8")
    Path("umlaut.card.toml").write_text(source.replace("potting compound", "Vergu\u00df \u2022"), encoding="utf-8")
    found = run("check", "umlaut.card.toml", PYTHONIOENCODING="ascii", PYTHONUTF8="0", LC_ALL="C")
    assert found.returncode == 0, found.stderr
    assert found.stdout.isascii()
    assert rb"Vergu\xdf \u2022" in found.stdout


def test_the_version_is_told(capsys):
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"cardproof {__version__}\n"


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_a_shell_is_given_its_completion(shell):
    shown = run("--show-completion", shell, _TYPER_COMPLETE_TEST_DISABLE_SHELL_DETECTION="1")  # name it, detect nothing
    assert shown.returncode == 0, shown.stderr
    assert f"_CARDPROOF_COMPLETE=complete_{shell}".encode() in shown.stdout


def test_commands_and_options_are_completed():
    def completed(words: str) -> list[str]:
        count = str(len(words.split(" ")) - 1)
        found = run(_CARDPROOF_COMPLETE="complete_bash", COMP_WORDS=words, COMP_CWORD=count)
        return found.stdout.decode().split()

    assert completed("cardproof c") == ["check", "convert", "compare"]
    assert completed("cardproof check --re") == ["--report"]
