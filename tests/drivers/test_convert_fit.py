import json
import math
import subprocess
import sys
import tomllib

import numpy as np
import pytest

from drivers.cli import main
from matlib.card import read_card
from matlib.shift import WLF
from matlib.shift.fit import fit_table
from matlib.units import TEMPERATURE
from tests.cards import SOUND, changed, toml

LN10 = math.log(10.0)
LAW = WLF(C1=14.2, C2=161.0, T_ref=353.15)
DEGC = np.array([40.0, 50.0, 60.0, 70.0, 80.0, 90.0, 100.0, 110.0, 120.0, 130.0])
SCATTER = np.array([0.04, -0.03, 0.01, 0.05, -0.02, -0.04, 0.02, 0.0, 0.03, -0.01])  # decades, invented
VALUES = LAW.ln_shift(DEGC + 273.15) / LN10 + SCATTER


def table_card(folder, *, anchored=True, **changes):
    """A card whose law is a table of measured shift factors, 0 at 80 degC by definition or as measured."""
    values = np.where(DEGC == 80.0, 0.0, VALUES) if anchored else VALUES
    points = [[T, a] for T, a in zip(DEGC.tolist(), values.tolist(), strict=True)]
    tables = changed({"shift": {"law": "table", "T_ref": 80.0, "points": points}, **changes})
    (folder / "table.card.toml").write_text(toml(tables), encoding="utf-8")
    return values


@pytest.fixture(autouse=True)
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "200")


def converted(*arguments):
    """The JSON of a conversion and the card that it wrote."""
    assert main(["convert", "table.card.toml", "-o", "new.card.toml", "--json", "a.json", *arguments]) == 0
    with open("a.json", encoding="utf-8") as file, open("new.card.toml", "rb") as card:
        return json.load(file), tomllib.load(card)


@pytest.mark.parametrize("form", ["wlf", "vft", "arrhenius"])
@pytest.mark.parametrize("anchored", [True, False])
def test_a_table_card_is_fitted_by_least_squares_to_its_own_points(tmp_path, form, anchored):
    values = table_card(tmp_path, anchored=anchored)
    data, card = converted("--to", form)
    fit = fit_table(DEGC + 273.15, values, 353.15, form)
    found = data["fit"]
    assert (found["method"], data["exact"]) == ("least-squares", False)
    assert [c["name"] for c in found["constants"]] == list(fit.names)
    scale = {"activation_energy": 1e-3}  # kJ/mol
    errors = [c["standard_error"] for c in found["constants"]]
    expected = [scale.get(n, 1.0) * e for n, e in zip(fit.names, fit.standard_errors, strict=True)]
    np.testing.assert_allclose(errors, expected, rtol=1e-12)
    for constant in found["constants"]:
        written = data["time_factor"] if constant["name"] == "level" else card["shift"][constant["name"]]
        value = 10.0 ** constant["value"] if constant["name"] == "level" else constant["value"]
        assert value == pytest.approx(written, rel=1e-12)
    np.testing.assert_allclose(found["correlation"], fit.correlation, atol=1e-12)
    assert found["residual_decades"] == pytest.approx(fit.residual_decades, rel=1e-12)
    assert found["aicc"] == pytest.approx(fit.aicc, rel=1e-12)
    assert found["support"].startswith("The data support an offset temperature")
    assert data["fitted_range"] == [313.15, 403.15]


def test_the_written_card_names_the_method_and_says_what_became_of_the_level(tmp_path):
    table_card(tmp_path)
    _, card = converted("--to", "wlf")
    made_from = card["made_from"]
    assert (made_from["law"], made_from["method"], made_from["exact"]) == ("table", "least-squares", False)
    assert made_from["range"] == [40.0, 130.0]
    assert "holds T_ref = 353.15 K (80 degC) at exactly 0" in made_from["note"]
    assert "The data support an offset" in made_from["note"]
    assert card["prony"] == SOUND["prony"]
    table_card(tmp_path, anchored=False)
    data, card = converted("--to", "wlf")
    assert "went into the relaxation times" in card["made_from"]["note"]
    level = data["fit"]["constants"][2]["value"]
    assert abs(level) > 1e-3
    times = [tau for tau, _ in card["prony"]["shear"]]
    np.testing.assert_allclose(times, [tau * 10.0**level for tau, _ in SOUND["prony"]["shear"]], rtol=1e-12)
    assert read_card("new.card.toml").material().shift.ln_shift(353.15) == 0.0


@pytest.mark.parametrize("anchored", [True, False])
@pytest.mark.parametrize("arguments", [(), ("--reference", "100degC"), ("--units", "degF")])
def test_the_largest_error_is_what_the_two_cards_are_apart(tmp_path, anchored, arguments):
    """Of the time ``tau a_T``, which is all that a card says about shifting, between the coldest and the hottest point."""
    table_card(tmp_path, anchored=anchored)
    data, _ = converted("--to", "vft", *arguments)
    old, new = (read_card(f).material() for f in ("table.card.toml", "new.card.toml"))
    T = np.linspace(313.15 + 1e-9, 403.15 - 1e-9, 20001)
    apart = np.log(new.shear.times[0] / old.shear.times[0]) + new.shift.ln_shift(T) - old.shift.ln_shift(T)
    largest = np.abs(apart).max() / LN10
    assert data["largest_error_decades"] == pytest.approx(largest, rel=1e-5)  # of a grid of 5 mK
    assert data["error_at"] == pytest.approx(T[np.abs(apart).argmax()], abs=0.02)


def test_constants_and_standard_errors_are_in_the_units_of_the_new_card(tmp_path):
    table_card(tmp_path)
    plain, _ = converted("--to", "vft")
    other, card = converted("--to", "vft", "--units", "degF")
    for one, two in zip(plain["fit"]["constants"], other["fit"]["constants"], strict=True):
        assert (one["unit"], two["unit"]) == ("degC", "degF")
        assert two["standard_error"] == pytest.approx(1.8 * one["standard_error"], rel=1e-12)
        assert two["value"] == card["shift"][two["name"]]
    T_inf = TEMPERATURE["degF"].to_si(card["shift"]["T_inf"])
    assert T_inf == pytest.approx(plain["fit"]["constants"][1]["value"] + 273.15, rel=1e-12)


def test_only_points_in_the_range_count(tmp_path):
    values = table_card(tmp_path)
    data, _ = converted("--to", "wlf", "--range", "60degC", "110degC")
    inside = (DEGC >= 60.0) & (DEGC <= 110.0)
    fit = fit_table(DEGC[inside] + 273.15, values[inside], 353.15, "wlf")
    assert data["fit"]["constants"][0]["value"] == pytest.approx(fit.values[0], rel=1e-12)
    assert data["fitted_range"] == [333.15, 383.15]
    assert data["fit"]["points"] == 5


def test_a_minimax_fit_stays_available(tmp_path):
    table_card(tmp_path)
    squares, _ = converted("--to", "wlf", "--range", "40degC", "130degC")
    minimax, card = converted("--to", "wlf", "--range", "40degC", "130degC", "--fit", "minimax")
    assert minimax["largest_error_decades"] < squares["largest_error_decades"]
    assert (minimax["fit"]["method"], minimax["fit"]["constants"], minimax["fit"]["support"]) == ("minimax", [], None)
    assert card["made_from"]["method"] == "minimax"


def test_every_other_law_is_fitted_by_minimax_and_exact_ones_are_not_fitted(tmp_path):
    (tmp_path / "table.card.toml").write_text(toml(SOUND), encoding="utf-8")
    data, card = converted("--to", "arrhenius")
    assert data["fit"]["method"] == card["made_from"]["method"] == "minimax"
    data, card = converted("--to", "vft")
    assert data["fit"] is None
    assert "method" not in card["made_from"]
    data, card = converted("--to", "table")
    assert data["fit"] is None
    assert card["made_from"]["method"] == "sampled"


def test_the_terminal_shows_constants_with_their_errors_scatter_correlation_and_support(tmp_path, capsys):
    table_card(tmp_path, anchored=False)
    assert main(["convert", "table.card.toml", "--to", "wlf", "-o", "new.card.toml"]) == 0
    shown = " ".join(capsys.readouterr().out.split())
    fit = fit_table(DEGC + 273.15, VALUES, 353.15, "wlf")
    assert "Least squares, 10 points, 7 degrees of freedom" in shown
    for value, error, half in zip(fit.values, fit.standard_errors, fit.half_widths(), strict=True):
        assert f"{value:.6g} {error:.3g} +- {half:.3g}" in shown
    assert f"Scatter about the curve: {fit.residual_decades:.3g} decades" in shown
    assert f"{fit.correlation[0, 1]:.4f} (C1, C2)" in shown
    assert "The data support an offset temperature" in shown


def test_what_the_points_cannot_tell_is_null_in_the_json(tmp_path, capsys):
    points = [[60.0, 1.6], [80.0, 0.0], [100.0, -1.4]]
    tables = changed({"shift": {"law": "table", "T_ref": 80.0, "points": points}})
    (tmp_path / "table.card.toml").write_text(toml(tables), encoding="utf-8")
    data, _ = converted("--to", "wlf")
    assert [c["standard_error"] for c in data["fit"]["constants"]] == [None, None]
    assert (data["fit"]["residual_decades"], data["fit"]["aicc"]) == (None, None)
    assert data["fit"]["support"].startswith("The data do not tell")
    assert "not known" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        (("--to", "wlf", "--range", "75degC", "90degC"), "too few points: wlf has 2 constants"),
        (("--to", "wlf", "--range", "200degC", "300degC"), "the table has no point from 473.15 K"),
        (("--to", "wlf", "--fit", "guess"), "unknown method for --fit 'guess': use one of least-squares, minimax"),
        (("--to", "vft", "--reference=-150degC"), "at or below the pole"),
    ],
)
def test_what_cannot_be_fitted_is_refused_in_one_line(tmp_path, capsys, arguments, text):
    table_card(tmp_path)
    assert main(["convert", "table.card.toml", "-o", "new.card.toml", *arguments]) == 2
    error = capsys.readouterr().err
    assert text in error
    assert error.count("\n") == 1
    assert not (tmp_path / "new.card.toml").exists()


def test_least_squares_of_a_card_without_a_table_is_refused(tmp_path, capsys):
    (tmp_path / "table.card.toml").write_text(toml(SOUND), encoding="utf-8")
    arguments = ["convert", "table.card.toml", "-o", "new.card.toml", "--to", "arrhenius", "--fit", "least-squares"]
    assert main(arguments) == 2
    assert "least squares needs the points of a table, and shift law wlf has none" in capsys.readouterr().err


def test_a_table_card_whose_points_scatter_passes_its_check(tmp_path, capsys):
    """The scatter is smaller than the steps, so that a_T falls from point to point."""
    table_card(tmp_path)
    assert main(["check", "table.card.toml"]) == 0
    assert "no findings" in capsys.readouterr().out


def test_a_conversion_of_another_law_loads_neither_scipy_nor_numba_nor_matplotlib(tmp_path):
    (tmp_path / "table.card.toml").write_text(toml(SOUND), encoding="utf-8")
    code = (
        "import sys\nfrom drivers.cli import main\n"
        "assert main(['convert', 'table.card.toml', '--to', 'arrhenius', '-o', 'n.card.toml', '--json', '-']) == 0\n"
        "heavy = {'scipy', 'numba', 'matplotlib'} & set(sys.modules)\nassert not heavy, heavy\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == 0, done.stderr
