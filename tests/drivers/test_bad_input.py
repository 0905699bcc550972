"""Cards and paths broken at random: an answer or one line a fault, never a crash, never a number that is none."""

import contextlib
import copy
import io
import json
import re
import tomllib
import warnings
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import tomlkit
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from hypothesis.strategies import DrawFn

from drivers.cli import main
from tests.drivers.files import CARD, PATH

COMPONENTS = """name = "by component"
mode = "components"
units = { time = "s", temperature = "K", stress = "MPa" }
start = { temperature = 350.0 }

[[segment]]
duration = 1.0
increments = 2
strain = { e11 = 0.01, g12 = 0.002, g13 = 0.0, g23 = 0.0 }
stress = { s22 = 0.0, s33 = -1.0 }

[[segment]]
duration = 0.0
temperature = 360.0
strain = { s11 = 0.0 }
"""
CARDS = (
    CARD,
    CARD.replace("[prony]", '[prony]\nyoung = [[1.0, 0.5]]\nlateral = "constant K"').replace("shear =", "# ").replace("bulk =", "# "),
    CARD.partition("[shift]")[0] + '[shift]\nlaw = "table"\nT_ref = 80.0\npoints = [[60.0, 2.0], [80.0, 0.0], [130.0, -4.0]]\n',
    CARD.partition("[shift]")[0] + '[shift]\nlaw = "polynomial"\nT_ref = 80.0\ncoefficients = [-0.1, 1e-4]\n',
    CARD.partition("[shift]")[0]
    + '[shift]\nlaw = "crossover"\nat = 90.0\n[shift.below]\nlaw = "arrhenius"\nT_ref = 80.0\nactivation_energy = 200.0\n'
    + '[shift.above]\nlaw = "vft"\nT_ref = 80.0\nT_inf = 20.0\nB = 1500.0\n',
)  # fmt: skip
PATHS = (PATH, PATH.replace("uniaxial stress", "hydrostatic"), COMPONENTS.replace("s11 =", "e11 ="))

NUMBERS = st.one_of(
    st.sampled_from(
        [
            0.0,
            -0.0,
            1.0,
            -1.0,
            1e-300,
            -1e-300,
            5e-324,
            1e300,
            -1e300,
            1e60,
            -1e60,
            1e31,
            1e9,
            1e-9,
            0.5,
            273.15,
            -273.15,
        ]
    ),
    st.sampled_from([float("nan"), float("inf"), float("-inf")]),
    st.sampled_from([0, -1, 3, 10**18, 2**63, -(10**30)]),
    st.floats(-1e4, 1e4),
    st.floats(allow_nan=False, allow_infinity=False),
)
JUNK = st.one_of(
    NUMBERS,
    st.text(max_size=8),
    st.booleans(),
    st.lists(NUMBERS, max_size=3),
    st.lists(st.lists(NUMBERS, max_size=3), max_size=3),
    st.dictionaries(st.text(max_size=4), NUMBERS, max_size=2),
)


def places(tree: Any) -> Iterator[tuple[Any, Any]]:
    """The table or list that holds each thing in a document, and its key there."""
    items = tree.items() if isinstance(tree, dict) else enumerate(tree) if isinstance(tree, list) else ()
    for key, value in items:
        yield tree, key
        yield from places(value)


def is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def wrong_numbers(draw: DrawFn, tree: dict[str, Any]) -> None:
    """A few numbers of other sizes and signs, of the same type: often still a card, or a path, and a strange one."""
    spots = [(parent, key) for parent, key in places(tree) if is_number(parent[key])]
    for _ in range(draw(st.integers(1, 3))):
        parent, key = draw(st.sampled_from(spots))
        if isinstance(parent[key], int):  # none of a size that would only take long
            parent[key] = draw(st.sampled_from([-1, 0, 1, 2, 5, 2 * 10**8, 10**18, 2**63]))
            continue
        factor = draw(st.sampled_from([-1.0, 0.0, 0.5, 2.0, 1e3, 1e-3, 1e6, 1e-6, 1e12, 1e-12, 1e30, 1e-30, 1e50]))
        parent[key] = draw(st.one_of(st.just(parent[key] * factor), NUMBERS))


def wrong_things(draw: DrawFn, tree: dict[str, Any]) -> None:
    """Keys deleted, renamed, or with the value of another key, or with a value of no use."""
    for _ in range(draw(st.integers(1, 3))):
        spots = list(places(tree))
        if not spots:
            return
        parent, key = draw(st.sampled_from(spots))
        kind = draw(st.sampled_from(["junk", "delete", "rename", "borrow"]))
        if kind == "delete":
            del parent[key]
        elif kind == "rename" and isinstance(parent, dict):
            parent[draw(st.text(min_size=1, max_size=6))] = parent.pop(key)
        elif kind == "borrow":
            other, other_key = draw(st.sampled_from(spots))
            parent[key] = copy.deepcopy(other[other_key])
        else:
            parent[key] = draw(JUNK)


def broken_text(draw: DrawFn, text: str) -> bytes:
    """A file cut, with bytes changed, or with lines doubled, lost or swapped."""
    kind = draw(st.sampled_from(["cut", "bytes", "double", "lose", "swap", "mark"]))
    data, lines = text.encode(), text.splitlines(keepends=True)
    k = draw(st.integers(0, len(lines) - 1))
    if kind == "cut":
        return data[: draw(st.integers(0, len(data)))]
    if kind == "bytes":
        at = draw(st.integers(0, len(data) - 1))
        return data[:at] + draw(st.binary(min_size=1, max_size=4)) + data[at + draw(st.integers(0, 3)) :]
    if kind == "double":
        return "".join([*lines[: k + 1], lines[k], *lines[k + 1 :]]).encode()
    if kind == "lose":
        return "".join(lines[:k] + lines[k + 1 :]).encode()
    if kind == "swap":
        other = draw(st.integers(0, len(lines) - 1))
        lines[k], lines[other] = lines[other], lines[k]
        return "".join(lines).encode()
    lines[k] = draw(
        st.sampled_from(
            ["[" * 3000 + "\n", "a." * 3000 + "a = 1\n", "x = 0x" + "f" * 5000 + "\n", "\x00\n", "\ufeff\n", "é = 1\n"]
        )
    )
    return "".join(lines).encode()


def broken(documents: tuple[str, ...]) -> st.SearchStrategy[bytes]:
    """A file made from one of some good ones."""

    @st.composite
    def of(draw: DrawFn) -> bytes:
        text = draw(st.sampled_from(documents))
        kind = draw(st.sampled_from(["numbers", "numbers", "numbers", "things", "text"]))
        if kind == "text":
            return broken_text(draw, text)
        tree = tomllib.loads(text)
        (wrong_numbers if kind == "numbers" else wrong_things)(draw, tree)
        return tomlkit.dumps(tree).encode()

    return of()


def run(*arguments: str) -> tuple[int, str, str]:
    """Exit status, standard output and standard error; a warning is an error."""
    out, err = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err), warnings.catch_warnings():
        warnings.simplefilter("error")
        status = main(list(arguments))
    return status, out.getvalue(), err.getvalue()


NO_NUMBER = re.compile(r"(?<![\w.])-?(nan|inf|infinity)(?![\w.])", re.IGNORECASE)


def assert_answered(given_files: list[str], written: list[Path], *arguments: str) -> int:
    """One run of a command with broken files is answered as it should."""
    for file in written:
        file.unlink(missing_ok=True)
    status, out, err = run(*arguments)
    assert status in (0, 1, 2)
    assert "Traceback" not in out + err
    lines = err.splitlines()
    if status == 2:
        assert lines
        assert out == ""
        for line in lines:
            assert line.startswith(("cardproof: ", *(f"{file}: " for file in given_files))), line
            assert len(line) < 1000
        assert not any(file.exists() for file in written)
        return status
    assert err == ""
    texts = [out, *(file.read_text() for file in written if file.exists())]
    for text in texts:
        assert not NO_NUMBER.search(text.replace("T_inf", "")), text
    return status


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    made = tmp_path_factory.mktemp("broken")
    (made / "good.card.toml").write_text(CARD)
    (made / "good.path.toml").write_text(PATH)
    return made


many = settings(
    max_examples=150,  # of cards and as many of paths
    phases=[Phase.explicit, Phase.generate, Phase.target],  # a failure is shown as it is found: no minutes of shrinking
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.function_scoped_fixture],
)


@given(content=broken(CARDS))
@many
def test_a_broken_card_is_answered_by_every_command(folder, content):
    card, path, good = str(folder / "x.card.toml"), str(folder / "good.path.toml"), str(folder / "good.card.toml")
    Path(card).write_bytes(content)
    csv, new, data = folder / "h.csv", folder / "new.card.toml", folder / "out.json"
    checked = assert_answered([card], [data], "check", card, "--json", str(data))
    if checked != 2:
        assert json.loads(data.read_text())["verdict"] == ("holds" if checked == 0 else "falls short")
    assert_answered([card], [csv], "drive", card, path, "-o", str(csv))
    for target in ("vft", "table"):
        if assert_answered([card], [new], "convert", card, "--to", target, "-o", str(new)) == 0:
            assert run("check", str(new))[0] != 2  # what is written can be read
    assert_answered([card], [data], "compare", good, card, "--path", path, "--json", str(data))


@given(content=broken(PATHS))
@many
def test_a_broken_path_is_answered_by_every_command(folder, content):
    card, path = str(folder / "good.card.toml"), str(folder / "x.path.toml")
    Path(path).write_bytes(content)
    csv, data = folder / "h.csv", folder / "out.json"
    assert_answered([path], [csv, data], "drive", card, path, "-o", str(csv), "--json", str(data))
    assert_answered([path], [data], "compare", card, card, "--path", path, "--json", str(data))


@pytest.mark.parametrize(
    ("name", "content", "found"),
    [
        ("missing", None, "found nothing, expected a file of this name"),
        ("folder", "", "folder"),
        ("empty", b"", "found nothing"),
        ("binary", bytes(range(256)) * 4, "expected UTF-8 text"),
        ("utf-16", "name = 1".encode("utf-16"), "expected UTF-8 text"),
        ("nested", b"x = " + b"[" * 5000, "nesting without end"),
        ("not TOML", b"<card/>", "expected valid TOML"),
        ("twice", b"name = 'a'\nname = 'b'\n", "expected valid TOML"),
        ("digits", b"name = 'a'\nmode = 0x" + b"f" * 5000, "a number of thousands of digits"),
        ("a line of its own", b'"x\\ny" = 1\n', "one of the keys"),
    ],
)
@pytest.mark.parametrize("command", ["check", "convert", "drive", "compare"])
def test_a_file_that_is_no_card_and_no_path_is_told_in_lines_that_name_it(folder, command, name, content, found):
    bad, good = folder / f"{name}.toml", str(folder / "good.card.toml")
    if content == "":
        bad.mkdir(exist_ok=True)
    elif content is not None:
        bad.write_bytes(content)
    new = folder / "never.toml"
    arguments = {
        "check": ("check", str(bad)),
        "convert": ("convert", str(bad), "--to", "vft", "-o", str(new)),
        "drive": ("drive", good, str(bad), "-o", str(new)),
        "compare": ("compare", good, good, "--path", str(bad)),
    }[command]
    assert assert_answered([str(bad)], [new], *arguments) == 2
    assert found in run(*arguments)[2]


@pytest.mark.parametrize(
    ("old", "new", "part"),
    [
        ("repeat = 2", "repeat = 10000001", "segment[3].repeat: found 10000001"),
        ("repeat = 2", "repeat = 10000000", None),
        ("increments = 8", "increments = 10000001", "segment[2].increments: found 10000001"),
        ("increments = 8", "increments = 10000000", None),
        ("increments = 3 }", "increments = 3, repeat = 2 }", "segment[3].segments[2].repeat: found 2, expected one of"),
        ("repeat = 2", "repeat = 2\nduration = 1.0", "segment[3].duration: found 1.0, expected one of"),
    ],
)
@pytest.mark.parametrize("command", ["drive", "compare"])
def test_huge_counts_and_tables_that_contradict_each_other_end_at_once(folder, command, old, new, part):
    path, card = folder / "huge.path.toml", str(folder / "good.card.toml")
    path.write_text(PATH.replace(old, new))
    arguments = {"drive": ("drive", card, str(path)), "compare": ("compare", card, card, "--path", str(path))}[command]
    status = assert_answered([str(path)], [], *arguments)
    if part is None:  # a long run that somebody may want, though not all of its rows; increments have no say in compare
        assert status == (0 if command == "compare" and "increments" in new else 2)
    else:
        assert part in run(*arguments)[2]
