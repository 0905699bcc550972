"""The two routines that a model is asked of: the built-in one, and the example in C in a process of its own."""

import importlib.util
import shutil
import subprocess
from contextlib import ExitStack
from pathlib import Path

import pytest

from drivers.demo.constants import example_constants, example_memory
from drivers.foreign.foreign import ForeignRoutine
from matlib.shift.reduced_time import SHIFT_RULES
from matlib.viscoelastic import LinearViscoelastic

SOURCE = Path(__file__).parents[2] / "drivers" / "demo" / "routine.c"

if importlib.util.find_spec("skfem") is None:  # the tests say that they are skipped; what they import holds no doctest
    collect_ignore = ["model.py", "meshes.py", "cylinder.py"]


@pytest.fixture(scope="session")
def in_c(tmp_path_factory):
    """The example in C, compiled once: give it a material, get a routine."""
    if shutil.which("gcc") is None:
        pytest.skip("needs gcc")
    folder = tmp_path_factory.mktemp("in_c")
    subprocess.run(["gcc", "-O2", "-shared", "-fPIC", "-o", folder / "r.so", SOURCE, "-lm"], check=True)
    with ExitStack() as ends:

        def routine(material):
            file = folder / "r.routine.toml"
            constants = ", ".join(repr(float(value)) for value in example_constants(material))
            file.write_text(
                f'library = "r.so"\nn_memory = {example_memory(material)}\norder = 2\nconstants = [{constants}]\n'
            )
            return ends.enter_context(ForeignRoutine(file))

        yield routine


def built_in(material):
    """The built-in routine, by the rules that the example in C follows."""
    return LinearViscoelastic(material=material, shift_rule=SHIFT_RULES["mean-log"])


@pytest.fixture(params=["built-in", "in C"])
def routine_for(request):
    """Give it a material, get one of the routines."""
    return built_in if request.param == "built-in" else request.getfixturevalue("in_c")
