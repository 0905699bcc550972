import ast
import graphlib
import subprocess
import sys
from fnmatch import fnmatch
from pathlib import Path

from tests.cards import SOUND, toml

ROOT = Path(__file__).parents[1]
LAYERS = [  # from the bottom up; a module imports from lower layers, and from its own without a circle
    "matlib matlib.version matlib.errors",
    "matlib.arrays",
    "matlib.units matlib.tensors matlib.files matlib.documents",
    "matlib.terms matlib.prony matlib.interconversion matlib.elastic matlib.effective matlib.mode_kernels matlib.shift*",
    "matlib.material matlib.packing matlib.recursion matlib.routine",
    "matlib.compiling matlib.kernels matlib.term_kernels matlib.weight_kernels",
    "matlib.viscoelastic matlib.ensemble",
    "matlib.card* matlib.shift_tables matlib.shift_findings matlib.finding matlib.admissibility",
    "drivers drivers.history drivers.path drivers.path_file drivers.record_file",
    "drivers.*",  # the loop, the reference solution, the battery, routines that are not ours
    "drivers.studies* drivers.sweep*",
    "drivers.report*",
    "drivers.commands*",
    "drivers.cli drivers.__main__ drivers.pytest_plugin",
]


def layer(module):
    """The layer whose pattern says the most about the module."""
    found = [(len(name), k) for k, names in enumerate(LAYERS) for name in names.split() if fnmatch(module, name)]
    assert found, f"give {module} a place in LAYERS"
    return max(found)[1]


class WithoutTypes(ast.NodeTransformer):
    """Takes away what only a type checker imports."""

    def visit_If(self, node):
        return None if ast.unparse(node.test) == "TYPE_CHECKING" else self.generic_visit(node)


def imports():
    """The modules of this project that each module imports, wherever in it the import stands."""
    files = [path for name in ("matlib", "drivers") for path in (ROOT / name).rglob("*.py")]
    modules = {".".join(path.relative_to(ROOT).with_suffix("").parts).removesuffix(".__init__"): path for path in files}
    graph = {}
    for module, path in modules.items():
        nodes = list(ast.walk(WithoutTypes().visit(ast.parse(path.read_text(encoding="utf-8")))))
        assert not [node for node in nodes if isinstance(node, ast.ImportFrom) and node.level], f"relative in {module}"
        names = {alias.name for node in nodes if isinstance(node, ast.Import) for alias in node.names}
        for node in nodes:
            if isinstance(node, ast.ImportFrom):
                inside = {f"{node.module}.{alias.name}" for alias in node.names} & modules.keys()
                names |= inside or {node.module}
        graph[module] = names & modules.keys()
    return graph


def reached(graph, module):
    """Everything that a module imports, and all that those import."""
    todo, seen = [module], set()
    while todo:
        new = graph[todo.pop()] - seen
        seen |= new
        todo += new
    return seen


def test_imports_run_one_way():
    wrong = [
        f"{module} imports {other}"
        for module, used in imports().items()
        for other in used
        if layer(other) > layer(module)
    ]
    assert not wrong


def test_imports_run_in_no_circle():
    order = list(graphlib.TopologicalSorter(imports()).static_order())
    assert order.index("matlib.errors") < order.index("drivers.cli")


def test_the_reference_solution_shares_nothing_with_what_it_judges():
    judged = {"matlib.recursion", "matlib.kernels", "matlib.viscoelastic"}
    assert not reached(imports(), "drivers.reference") & judged


def test_checking_and_converting_a_card_loads_nothing_heavy(tmp_path):
    (tmp_path / "a.card.toml").write_text(toml(SOUND))
    script = """
import sys
import matlib.admissibility, matlib.card, matlib.card_conversion
card = matlib.card.read_card("a.card.toml")
assert matlib.admissibility.check_card(card) == []
assert matlib.card_conversion.convert_card(card, "vft").text()
print(*sorted({"numba", "scipy", "matplotlib"} & sys.modules.keys()))
"""
    run = subprocess.run([sys.executable, "-c", script], cwd=tmp_path, capture_output=True, text=True, timeout=60)
    assert run.returncode == 0, run.stderr
    assert run.stdout.strip() == ""
