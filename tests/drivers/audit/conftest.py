"""Building routines from the example in C."""

import shutil
import subprocess
from pathlib import Path

import pytest

from drivers.demo.constants import example_constants, example_memory
from matlib.card import read_card

DEMO = Path(__file__).parents[3] / "drivers" / "demo"


@pytest.fixture(scope="session")
def built(tmp_path_factory):
    """Build the example, changed or not, for a card: returns the routine file."""
    if shutil.which("gcc") is None:
        pytest.skip("needs gcc")
    made = iter(range(10**6))

    def build(changes=(), card=DEMO / "laboratory.card.toml", order=2.0, time_limit=0.5):
        folder = tmp_path_factory.mktemp(f"routine{next(made)}")
        source = (DEMO / "routine.c").read_text(encoding="utf-8")
        for old, new in changes:
            assert old in source, old
            source = source.replace(old, new)
        (folder / "r.c").write_text(source, encoding="utf-8")
        subprocess.run(["gcc", "-O1", "-shared", "-fPIC", "-o", folder / "r.so", folder / "r.c", "-lm"], check=True)
        material = read_card(card).material()
        constants = ", ".join(repr(float(value)) for value in example_constants(material))
        shutil.copy(card, folder / "own.card.toml")
        (folder / "r.routine.toml").write_text(
            f'name = "planted"\nlibrary = "r.so"\nn_memory = {example_memory(material)}\norder = {order}\n'
            f'card = "own.card.toml"\ntime_limit = {time_limit}\nconstants = [{constants}]\n'
        )
        return folder / "r.routine.toml"

    return build
