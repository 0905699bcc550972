"""The battery: which window a card states, and what its paths cover."""

import dataclasses
import math

import numpy as np
import pytest
from hypothesis import given, settings

from drivers.battery import LONGEST, SHORTEST, Window, battery, card_window
from drivers.point import drive
from matlib.card import Card, read_card
from matlib.card_conversion import card_text
from matlib.errors import FileError
from matlib.files import write_atomically
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import WLF, MeasuredRange
from matlib.viscoelastic import LinearViscoelastic
from tests.strategies import card_tables

CARD = """name = "c"
[units]
stress = "MPa"
time = "min"
temperature = "degC"
[elastic]
E = 3000.0
nu = 0.3
state = "instantaneous"
[prony]
relative_to = "instantaneous"
shear = [[1e-3, 0.2], [10.0, 0.3]]
bulk = [[100.0, 0.1]]
[shift]
law = "wlf"
T_ref = 80.0
C1 = 14.2
C2 = 61.0
"""


@pytest.fixture
def card(tmp_path):
    def put(text: str) -> Card:
        file = tmp_path / "c.card.toml"
        file.write_text(text)
        return read_card(file)

    return put


def window_of(card: Card) -> Window:
    return card_window(card, card.material())


def test_a_stated_service_window_is_taken_as_it_is(card):
    window = window_of(card(CARD + "[service]\ntemperature = [40.0, 120.0]\ntime = [1.0, 600.0]\n"))
    assert window.temperature == pytest.approx((313.15, 393.15), rel=1e-15)
    assert window.time == (60.0, 36000.0)
    assert window.source == "service window of the card"


def test_service_times_beyond_all_reason_are_cut(card):
    window = window_of(card(CARD + "[service]\ntemperature = [40.0, 120.0]\ntime = [1e-30, 1e30]\n"))
    assert window.time == (SHORTEST, LONGEST)


def test_without_service_the_measured_range_and_the_relaxation_times_are_covered(card):
    window = window_of(card(CARD + "measured = [50.0, 110.0]\n"))
    assert window.temperature == pytest.approx((323.15, 383.15), rel=1e-15)
    assert window.time == pytest.approx((6e-3, 6e4), rel=1e-12)  # a tenth of 1e-3 min, ten times 100 min
    assert window.source.startswith("measured range")


def test_without_either_temperatures_stay_near_the_reference_and_off_the_pole(card):
    window = window_of(card(CARD))
    assert window.temperature == pytest.approx((333.15, 373.15), rel=1e-15)
    steep = window_of(card(CARD.replace("C2 = 61.0", "C2 = 20.0")))
    assert steep.temperature == pytest.approx((333.15 + 15.0, 373.15), rel=1e-15)  # the pole is at 60 degC
    steeper = window_of(card(CARD.replace("C2 = 61.0", "C2 = 10.0")))
    assert steeper.temperature == pytest.approx((353.15, 373.15), rel=1e-15)


def test_a_law_that_answers_near_its_reference_alone_has_a_window_of_one_temperature(card):
    near = MeasuredRange(law=WLF(C1=14.2, C2=61.0, T_ref=353.15), low=352.15, high=354.15, outside="refuse")
    plain = card(CARD)
    window = card_window(plain, dataclasses.replace(plain.material(), shift=near))
    assert window.temperature == (353.15, 353.15)


def test_times_are_spread_by_their_logarithm():
    window = Window(temperature=(300.0, 310.0), time=(1e-2, 1e4), source="test")
    assert window.time_at(0.0) == pytest.approx(1e-2)
    assert window.time_at(0.5) == pytest.approx(10.0)
    assert window.time_at(1.0) == pytest.approx(1e4)
    assert window.middle_temperature == 305.0


def resin_battery(resin: Material) -> tuple:
    return battery(resin, Window(temperature=(333.15, 393.15), time=(1.0, 1e5), source="test"))


def test_the_battery_relaxes_creeps_pulls_and_changes_temperature(resin):
    paths = resin_battery(resin)
    names = [path.name for path in paths]
    assert len(set(names)) == len(names)
    for kind, count in (
        ("relaxation", 3),
        ("shear relaxation", 1),
        ("confined relaxation", 1),
        ("creep", 2),
        ("pull", 9),
    ):
        assert sum(name.startswith(kind) for name in names) == count, kind
    assert names[-3:] == ["thermal jump", "thermal cycle", "clamped cooling"]
    assert {path.mode.name for path in paths} == {"uniaxial stress", "uniaxial strain", "simple shear"}


def test_the_battery_spans_its_window_and_never_leaves_it(resin):
    ranges = np.array([path.temperature_range for path in resin_battery(resin)])
    assert ranges[:, 0].min() == 333.15
    assert ranges[:, 1].max() == 393.15
    assert max(path.duration for path in resin_battery(resin)) >= 1e5


def test_at_one_temperature_there_are_no_thermal_paths(resin):
    paths = battery(resin, Window(temperature=(353.15, 353.15), time=(1.0, 1e5), source="test"))
    assert all(path.temperature_range == (353.15, 353.15) for path in paths)
    assert [path.name for path in paths].count("relaxation, 80 degC") == 1


def test_every_path_of_the_battery_runs_and_bears_stress(resin):
    for path in resin_battery(resin):
        h = drive(LinearViscoelastic(material=resin), path, keep="ends")
        assert h.peak_stress > 1e5
        assert math.isclose(h.time[-1], path.duration, rel_tol=1e-12)


@given(tables=card_tables())
@settings(max_examples=40)
def test_every_admissible_card_has_a_battery_that_runs(tables, tmp_path_factory):
    file = tmp_path_factory.getbasetemp() / "drawn.card.toml"
    write_atomically(file, card_text(tables))
    drawn = read_card(file)
    try:
        material = drawn.material()
    except FileError:  # a drawn series that the solid of these constants cannot have
        return
    window = card_window(drawn, material)
    assert window.temperature[0] <= window.temperature[1]
    assert SHORTEST <= window.time[0] <= window.time[1] <= LONGEST
    for path in battery(material, window):
        h = drive(LinearViscoelastic(material=material), path.with_increments(5), keep="ends")
        assert h.peak_stress > 0.0


def test_a_liquid_has_a_battery_as_well():
    liquid = Material(
        shear=PronySeries.from_fractions(1e9, [0.5, 0.5], [1.0, 10.0]),
        bulk=PronySeries.elastic(2e9),
        shift=WLF(C1=14.2, C2=61.0, T_ref=353.15),
    )
    for path in battery(liquid, Window(temperature=(343.15, 363.15), time=(1.0, 1e3), source="test")):
        assert drive(LinearViscoelastic(material=liquid), path, keep="ends").peak_stress > 0.0
