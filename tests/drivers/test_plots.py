"""Pictures: axes with quantities and units, what is drawn on them."""

import dataclasses

import numpy as np
import pytest

from drivers.history import History
from drivers.path import Path
from drivers.path_file import read_path
from drivers.point import drive
from drivers.report.plots import comparison_figure, drive_figure
from drivers.studies.compare import Comparison, compare
from matlib.card import Card, read_card
from matlib.viscoelastic import LinearViscoelastic
from tests.drivers.files import CARD, PATH, SOFTER


@pytest.fixture
def cards(tmp_path) -> list[Card]:
    made = []
    for name, text in (("a", CARD), ("b", SOFTER.replace("resin [a]", "resin b"))):
        (tmp_path / f"{name}.card.toml").write_text(text)
        made.append(read_card(tmp_path / f"{name}.card.toml"))
    return made


@pytest.fixture
def path(tmp_path) -> Path:
    (tmp_path / "p.path.toml").write_text(PATH)
    return read_path(tmp_path / "p.path.toml")


def respond(card: Card, path: Path) -> History:
    return drive(LinearViscoelastic(material=card.material()), path)


def compared(cards: list[Card], path: Path) -> Comparison:
    a, b = (card.material() for card in cards)
    return compare(a, b, [path], tolerance=0.01, temperatures=(338.15, 398.15))


def test_a_drive_is_drawn_over_time_and_strain_in_the_units_of_the_card(cards, path):
    history = respond(cards[0], path)
    stress, temperature, loop = drive_figure(history, cards[0], path).axes
    assert (stress.get_ylabel(), temperature.get_ylabel()) == ("s11 [MPa]", "temperature [degC]")
    assert temperature.get_xlabel() == "time [min]"
    assert (loop.get_xlabel(), loop.get_ylabel()) == ("e11 [-]", "s11 [MPa]")
    t, s = stress.lines[0].get_data()
    np.testing.assert_allclose(t, history.time / 60.0)
    np.testing.assert_allclose(s, history.stress[:, 0] / 1e6)
    np.testing.assert_allclose(temperature.lines[0].get_ydata(), history.temperature - 273.15)
    np.testing.assert_allclose(loop.lines[0].get_xdata(), history.strain[:, 0])


def test_a_drive_is_titled_with_card_and_path_as_they_are_written(cards, path):
    odd = dataclasses.replace(path, name="cost $x$ [b]")
    figure = drive_figure(respond(cards[0], path), cards[0], odd)
    assert figure.get_suptitle() == "resin [a], revision 2 on cost $x$ [b]"


def test_a_relaxation_over_decades_has_a_logarithmic_time(cards, path):
    pull, dwell = path.segments[:2]
    step = dataclasses.replace(pull, durations=np.zeros(1))
    hold = dataclasses.replace(dwell, durations=np.array([1e9]), increments=60)
    long = dataclasses.replace(path, parts=(step, hold))
    stress, temperature, _ = drive_figure(respond(cards[0], long), cards[0], long).axes
    assert stress.get_xscale() == "log"
    assert temperature.get_xlabel() == "time [d]"


def test_a_path_without_strain_or_stress_is_drawn_as_well(cards, path):
    still = dataclasses.replace(path.segments[0], targets=np.zeros((1, 6)), durations=np.zeros(1))
    rest = dataclasses.replace(path, parts=(still,))
    figure = drive_figure(respond(cards[0], rest), cards[0], rest)
    figure.canvas.draw()
    assert figure.axes[0].get_ylabel() == "s11 [MPa]"


def test_a_comparison_draws_both_responses_their_difference_and_both_shift_laws(cards, path):
    comparison = compared(cards, path)
    figure = comparison_figure(comparison, *cards)
    responses, difference, laws = figure.axes
    assert responses.get_title(loc="left") == "worst path: pull, dwell, quench"
    assert responses.get_ylabel() == "s11 [MPa]"
    assert (difference.get_xlabel(), difference.get_ylabel()) == ("time [min]", "B - A, s11 [MPa]")
    assert difference.get_title(loc="left") == "difference, B - A"
    assert (laws.get_xlabel(), laws.get_ylabel()) == ("temperature [degC]", "log10 a_T [-], 0 at 80 degC")
    assert [line.get_label() for line in responses.lines] == ["A", "B"]
    assert [text.get_text() for text in laws.get_legend().get_texts()] == [
        "A",
        "B",
        "service window",
        "measured",
        "pole of A and B",
    ]
    a, b = (np.asarray(line.get_ydata()) for line in responses.lines)
    np.testing.assert_allclose(difference.lines[-1].get_ydata(), b - a)
    np.testing.assert_allclose(b, 0.98 * a, atol=1e-6 * a.max())  # every modulus 2 % down
    assert figure.get_suptitle() == "different\nA (solid): resin [a], revision 2\nB (dashed): resin b, revision 2"


def test_two_curves_are_told_apart_without_colour(cards, path):
    responses = comparison_figure(compared(cards, path), *cards).axes[0]
    assert len({line.get_linestyle() for line in responses.lines}) == 2


def test_a_card_without_an_answer_leaves_one_curve(cards, path, tmp_path):
    (tmp_path / "c.card.toml").write_text(
        CARD.replace('"extrapolate"', '"refuse"').replace("[60.0, 130.0]", "[75.0, 130.0]")
    )
    refusing = read_card(tmp_path / "c.card.toml")
    both = [cards[0], refusing]
    responses, difference, laws = comparison_figure(compared(both, path), *both).axes
    assert [line.get_label() for line in responses.lines] == ["A"]
    assert len(difference.lines) == 0
    a, b = (np.isfinite(line.get_ydata()) for line in laws.lines[:2])
    assert 0 < b.sum() < a.sum()  # as far as it answers


def test_two_cards_without_an_answer_leave_a_word(cards, path, tmp_path):
    (tmp_path / "c.card.toml").write_text(
        CARD.replace('"extrapolate"', '"refuse"').replace("[60.0, 130.0]", "[75.0, 130.0]")
    )
    refusing = read_card(tmp_path / "c.card.toml")
    figure = comparison_figure(compared([refusing, refusing], path), refusing, refusing)
    assert [text.get_text() for text in figure.axes[0].texts] == ["no response"]
    figure.canvas.draw()
