import sys
import textwrap

import numpy as np
import pytest

from matlib.errors import ParameterError
from matlib.shift import PluginError, Polynomial, plugin_laws
from matlib.shift.registry import GROUP
from matlib.units import TEMPERATURE

MODULE = """
    from matlib.errors import ParameterError
    from matlib.shift import Polynomial

    NOT_CALLABLE = 3

    def straight(constants, temperature_unit):
        if constants["slope"] >= 0.0:
            raise ParameterError("slope", "< 0", constants["slope"])
        slope = constants["slope"] / temperature_unit.difference_to_si(1.0)
        return Polynomial(coefficients=[slope], T_ref=temperature_unit.to_si(constants["T_ref"]))

    def fails(constants, temperature_unit):
        return constants["no such key"]

    def wrong(constants, temperature_unit):
        return "not a law"
"""
ENTRY_POINTS = f"""
    [{GROUP}]
    straight = invented_laws:straight
    fails = invented_laws:fails
    wrong = invented_laws:wrong
    number = invented_laws:NOT_CALLABLE
    missing = no_such_module_at_all:law
"""


def install(folder, name, entry_points):
    """Write the metadata of a distribution as an installer leaves it."""
    info = folder / f"{name}-1.0.dist-info"
    info.mkdir(parents=True)
    (info / "METADATA").write_text(f"Metadata-Version: 2.1\nName: {name}\nVersion: 1.0\n")
    (info / "entry_points.txt").write_text(textwrap.dedent(entry_points))


@pytest.fixture
def plugins(tmp_path, monkeypatch):
    """A distribution with laws of its own, on the path as if it were installed."""
    install(tmp_path, "invented_laws", ENTRY_POINTS)
    (tmp_path / "invented_laws.py").write_text(textwrap.dedent(MODULE))
    monkeypatch.syspath_prepend(tmp_path)
    yield tmp_path
    sys.modules.pop("invented_laws", None)


@pytest.mark.usefixtures("plugins")
def test_an_installed_law_is_found_and_made_from_the_constants_of_a_card():
    law = plugin_laws()["straight"]({"slope": -0.18, "T_ref": 20.0}, TEMPERATURE["degC"])
    assert isinstance(law, Polynomial)
    assert law.T_ref == pytest.approx(293.15)
    np.testing.assert_allclose(law.ln_shift(303.15), -1.8 * np.log(10.0), rtol=1e-12)


@pytest.mark.usefixtures("plugins")
def test_nothing_is_imported_before_a_law_is_used():
    assert "straight" in plugin_laws()
    assert "invented_laws" not in sys.modules


def test_without_plug_ins_there_are_none():
    assert "straight" not in plugin_laws()


@pytest.mark.usefixtures("plugins")
def test_what_a_plug_in_says_about_a_constant_is_passed_on():
    with pytest.raises(ParameterError, match="`slope` must be < 0"):
        plugin_laws()["straight"]({"slope": 0.1, "T_ref": 20.0}, TEMPERATURE["degC"])


@pytest.mark.usefixtures("plugins")
@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("missing", "cannot be imported: ModuleNotFoundError: No module named 'no_such_module_at_all'"),
        ("fails", "raised KeyError: 'no such key'"),
        ("wrong", "gave a str where a ShiftLaw is expected"),
        ("number", "is a int, not a callable"),
    ],
)
def test_a_plug_in_that_breaks_the_contract_is_named(name, reason):
    with pytest.raises(PluginError) as caught:
        plugin_laws()[name]({}, TEMPERATURE["K"])
    assert caught.value.law == name
    assert caught.value.target in str(caught.value)
    assert reason in str(caught.value)


def test_two_plug_ins_of_one_name_are_not_chosen_between(plugins):
    install(plugins, "other_laws", f"[{GROUP}]\nstraight = other_laws:straight\n")
    with pytest.raises(PluginError, match="one of several installed under that name"):
        plugin_laws()["straight"]({}, TEMPERATURE["K"])


def test_the_same_plug_in_met_twice_on_the_path_is_one(plugins):
    install(plugins / "again", "invented_laws_again", ENTRY_POINTS)
    sys.path.insert(0, str(plugins / "again"))
    try:
        assert len(plugin_laws()["straight"].entry_points) == 1
    finally:
        sys.path.remove(str(plugins / "again"))
