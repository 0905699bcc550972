"""One page of every command, from small files with names that are hard on a page."""

import os
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from drivers.cli import main
from drivers.demo import __path__ as demo_folders
from tests.drivers.files import CARD, PATH, SOFTER

HOSTILE = 'resin <script>alert("x")</script> & $\\\\frac{1}{2}$ {{ 7*7 }} Grüße_' + 22 * "long"
SWEEP = """name = "sweep <b>"
[cases]
cards = ["[01].card.toml"]
paths = ["../p.path.toml"]
tolerance = 1e-6
"""
COMMANDS = {
    "check": ("check", "a.card.toml"),
    "check-many": ("check", "a.card.toml", "b.card.toml"),
    "check-library": ("check", "library"),
    "convert": ("convert", "a.card.toml", "--to", "arrhenius", "-o", "fit.card.toml"),
    "drive": ("drive", "a.card.toml", "p.path.toml", "-o", "h.csv"),
    "compare": ("compare", "a.card.toml", "b.card.toml", "--path", "p.path.toml", "--path", "oven.path.toml"),
    "steps": ("steps", "a.card.toml", "p.path.toml", "--tolerance", "1%", "--recursion", "exponential"),
    "record": ("record", "a.card.toml", "--path", "p.path.toml", "-o", "a.baseline.json"),
    "verify": ("verify", "b.card.toml", "a.baseline.json"),
    "audit": ("audit", "python.routine.toml", "--quick"),
    "sweep": ("sweep", "library/s.sweep.toml", "--processes", "1"),
}


def toml_text(text: str) -> str:
    return text.replace('"', '\\"')


def write_files(folder: Path) -> None:
    """Cards, paths, a record, a routine, a sweep and a library."""
    name = toml_text(HOSTILE)
    (folder / "a.card.toml").write_text(CARD.replace("resin [a]", name), encoding="utf-8")
    (folder / "b.card.toml").write_text(SOFTER.replace("resin [a]", f"{name} b"), encoding="utf-8")
    (folder / "p.path.toml").write_text(PATH.replace('"pull, dwell, quench"', f'"{name}"'), encoding="utf-8")
    record = "time [s],temperature [degC],strain [-]\n0,80,0\n60,80,0.002\n600,90,0.002\n"
    (folder / "oven.csv").write_text(record)
    oven = 'name = "oven"\nmode = "uniaxial stress"\nrecord = "oven.csv"\n[units]\ntime = "s"\ntemperature = "degC"\n'
    (folder / "oven.path.toml").write_text(oven)
    for file in ("python.routine.toml", "routine.py", "laboratory.card.toml"):
        (folder / file).write_bytes((Path(demo_folders[0]) / file).read_bytes())
    (folder / "library").mkdir()
    (folder / "library" / "s.sweep.toml").write_text(SWEEP)
    for k in range(3):
        (folder / "library" / f"{k}.card.toml").write_text(CARD.replace("[a]", str(k)))
    (folder / "library" / "bad.card.toml").write_text(CARD.replace("T_ref = 80.0", 'T_ref = "<i>warm</i>"'))


@pytest.fixture(scope="session")
def pages(tmp_path_factory) -> Iterator[dict[str, Path]]:
    """The page of every command by name, in the folder of the files that went in."""
    folder = tmp_path_factory.mktemp("pages")
    write_files(folder)
    before = Path.cwd()
    os.chdir(folder)
    try:
        for name, arguments in COMMANDS.items():
            status = main([*arguments, "--report", f"{name}.html", "--json", f"{name}.json"])
            assert status in (0, 1, 2 if name == "check-library" else 0), name
        yield {name: folder / f"{name}.html" for name in COMMANDS}
    finally:
        os.chdir(before)


@pytest.fixture
def page(pages) -> Callable[[str], str]:
    """The text of a page by the name of its command."""
    return lambda name: pages[name].read_text(encoding="utf-8")
