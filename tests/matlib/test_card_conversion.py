import math
import tomllib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from matlib.card_conversion import card_text, convert_card
from matlib.errors import ConversionError, FileError
from matlib.files import write_atomically
from matlib.units import STRESS, TEMPERATURE, TIME
from tests.cards import GONE, SOUND, changed, read
from tests.strategies import COLD, HOT, LN10, arrhenius_laws, card_tables, law_constants, vft_laws, wlf_laws

KELVIN = np.linspace(COLD + 1e-9, HOT - 1e-9, 101)  # inside by more than the rounding of a temperature
FAMILY = ("wlf", "vft", "arrhenius")
VFT_CARD = changed({"shift": {"law": "vft", "T_ref": 80.0, "T_inf": -81.0, "B": 5200.0}})
ARRHENIUS_CARD = changed({"shift": {"law": "arrhenius", "T_ref": 80.0, "activation_energy": 120.0}})


def read_back(converted, folder):
    """The card that a conversion writes, read from its text."""
    folder.mkdir(exist_ok=True)
    file = folder / "new.card.toml"
    write_atomically(file, converted.text())
    return read(folder, tomllib.loads(file.read_text(encoding="utf-8")))


def assert_same_material(one, other):
    """Equal moduli, expansion and relaxation times at every temperature, ``ln(tau a_T)``.

    A temperature of three figures is rounded by 1e-13 K in a file, once or twice, where ln a_T changes by up to 5 a
    kelvin: 1e-12, and as much again relative where ln a_T is large.
    """
    for a, b in ((one.shear, other.shear), (one.bulk, other.bulk)):
        assert a.equilibrium == pytest.approx(b.equilibrium, rel=1e-12)
        np.testing.assert_allclose(a.moduli, b.moduli, rtol=1e-12)
        ln_a, ln_b = one.shift.ln_shift(KELVIN), other.shift.ln_shift(KELVIN)
        tolerance = 2e-12 + 1e-13 * np.abs(ln_b)
        for tau_a, tau_b in zip(a.times, b.times, strict=True):
            assert np.all(np.abs(math.log(tau_a) + ln_a - math.log(tau_b) - ln_b) <= tolerance)
    assert one.expansion == pytest.approx(other.expansion, rel=1e-14)


@st.composite
def family_cards(draw):
    """Cards whose law is WLF, VFT or Arrhenius, with a range or none."""
    tables = draw(card_tables())
    law = draw(st.one_of(wlf_laws(COLD, HOT), vft_laws(COLD, HOT), arrhenius_laws(COLD, HOT)))
    limits = {key: tables["shift"][key] for key in ("measured", "outside") if key in tables["shift"]}
    tables["shift"] = draw(law_constants(law, tables["units"]["temperature"])) | limits
    return tables


new_units = st.tuples(*(st.sampled_from(list(table.values())) for table in (STRESS, TIME, TEMPERATURE)))


@settings(max_examples=150)
@given(
    tables=family_cards(),
    to=st.sampled_from(["wlf", "vft"]),
    T_ref=st.none() | st.floats(COLD + 1.0, HOT),
    units=st.just(()) | new_units,
    base=st.sampled_from([None, 10, "e"]),
)
def test_an_exact_conversion_says_the_same_whatever_else_changes(tmp_path_factory, tables, to, T_ref, units, base):
    folder = tmp_path_factory.getbasetemp()
    card = read(folder, tables)
    converted = convert_card(card, to, T_ref=T_ref, units=units, base=base)
    assert converted.conversion.exact
    new = read_back(converted, folder)
    assert_same_material(new.material(), card.material())
    assert new.document.shift["law"] == to
    if T_ref is not None:
        assert new.material().shift.T_ref == pytest.approx(T_ref, rel=1e-15)
    if card.service_temperature is not None:
        assert new.service_temperature == pytest.approx(card.service_temperature, rel=1e-15)
        assert new.service_time == pytest.approx(card.service_time, rel=1e-15)


@settings(max_examples=100)
@given(tables=card_tables(), T_ref=st.floats(COLD + 1.0, HOT), units=new_units)
def test_any_law_keeps_its_meaning_when_reference_and_units_change(tmp_path_factory, tables, T_ref, units):
    folder = tmp_path_factory.getbasetemp()
    card = read(folder, tables)
    converted = convert_card(card, tables["shift"]["law"], T_ref=T_ref, units=units)
    assert converted.conversion.exact
    new = read_back(converted, folder)
    assert_same_material(new.material(), card.material())
    assert new.document.shift["law"] == tables["shift"]["law"]


@settings(max_examples=50)
@given(tables=family_cards(), T_ref=st.floats(COLD + 1.0, HOT), units=new_units)
def test_there_and_back_is_the_old_card(tmp_path_factory, tables, T_ref, units):
    folder = tmp_path_factory.getbasetemp()
    card = read(folder, tables)
    there = read_back(convert_card(card, "vft", T_ref=T_ref, units=units), folder)
    back_units = (card.stress_unit, card.time_unit, card.temperature_unit)
    back = read_back(
        convert_card(there, tables["shift"]["law"], T_ref=card.material().shift.T_ref, units=back_units), folder
    )
    assert back.document.units == card.document.units
    assert_same_material(back.material(), card.material())


@given(tables=card_tables())
def test_text_reads_back_to_the_tables(tables):
    assert tomllib.loads(card_text(tables)) == tables


def test_wlf_becomes_vft_by_the_textbook(tmp_path):
    shift = convert_card(read(tmp_path, SOUND), "vft").shift
    assert (shift["law"], shift["T_ref"], shift["T_inf"]) == ("vft", 80.0, -81.0)
    assert shift["B"] == pytest.approx(math.log(10.0) * 14.2 * 161.0, rel=1e-14)
    assert (shift["measured"], shift["outside"]) == ([-40.0, 130.0], "extrapolate")


def test_arrhenius_becomes_wlf_with_c2_the_reference_in_kelvin(tmp_path):
    shift = convert_card(read(tmp_path, ARRHENIUS_CARD), "wlf", base="e").shift
    assert shift["C2"] == pytest.approx(353.15, rel=1e-15)
    assert shift["C1"] == pytest.approx(120e3 / 8.314462618 / 353.15, rel=1e-14)
    assert shift["base"] == "e"


def test_wlf_with_its_pole_at_absolute_zero_becomes_arrhenius(tmp_path):
    card = read(tmp_path, changed({"shift": {"law": "wlf", "T_ref": 80.0, "C1": 10.0, "C2": 353.15}}))
    converted = convert_card(card, "arrhenius")
    assert converted.conversion.exact
    # B = ln 10 C1 C2; a pole within a rounding of 0 K leaves 1e-13 of B open
    energy = math.log(10.0) * 10.0 * 353.15 * 8.314462618e-3
    assert converted.shift["activation_energy"] == pytest.approx(energy, rel=1e-12)


@pytest.mark.parametrize("to", ["wlf", "vft"])
def test_relaxation_times_move_along_with_the_reference(tmp_path, to):
    card = read(tmp_path, changed({"prony.shear": [[1e-2, 0.2], [1.0, 0.3], [1e2, 0.2]]}))
    converted = convert_card(card, to, T_ref=373.15)
    factor = 10.0 ** (-14.2 * 20.0 / 181.0)
    assert converted.conversion.time_factor == pytest.approx(factor, rel=1e-13)
    times, fractions = np.transpose(converted.tables["prony"]["shear"])
    np.testing.assert_allclose(times, factor * np.array([1e-2, 1.0, 1e2]), rtol=1e-13)
    assert fractions.tolist() == [0.2, 0.3, 0.2]
    assert converted.shift["T_ref"] == 100.0
    if to == "wlf":
        assert converted.shift["C2"] == pytest.approx(181.0, rel=1e-15)
        assert converted.shift["C1"] == pytest.approx(14.2 * 161.0 / 181.0, rel=1e-14)


def test_numbers_that_nothing_changes_keep_their_digits(tmp_path):
    converted = convert_card(read(tmp_path, SOUND), "vft")
    for key in ("name", "revision", "note", "units", "elastic", "prony", "expansion", "service"):
        assert converted.tables[key] == SOUND[key]


def test_every_number_is_written_in_the_new_units(tmp_path):
    units = (STRESS["GPa"], TIME["min"], TEMPERATURE["degF"])
    tables = changed({"prony": {"relative_to": "absolute", "shear": [[120.0, 300.0]], "bulk": [[6.0, 900.0]]}})
    new = convert_card(read(tmp_path, tables), "wlf", units=units).tables
    assert new["units"] == {"stress": "GPa", "time": "min", "temperature": "degF"}
    assert new["elastic"] == {"E": pytest.approx(3.0), "nu": 0.35, "state": "instantaneous"}
    np.testing.assert_allclose(new["prony"]["shear"], [[2.0, 0.3]], rtol=1e-15)
    np.testing.assert_allclose(new["prony"]["bulk"], [[0.1, 0.9]], rtol=1e-15)
    assert (new["shift"]["T_ref"], new["shift"]["measured"]) == (176.0, [-40.0, 266.0])
    assert new["shift"]["C2"] == pytest.approx(161.0 * 1.8, rel=1e-15)
    assert new["expansion"]["alpha"] == pytest.approx(6.2e-5 / 1.8, rel=1e-15)
    assert new["service"]["temperature"] == [140.0, 230.0]
    np.testing.assert_allclose(new["service"]["time"], [1e-1 / 60.0, 1e2 / 60.0], rtol=1e-15)


def test_a_card_that_says_little_is_converted_too(tmp_path):
    tables = {key: SOUND[key] for key in ("name", "units", "elastic")}
    card = read(tmp_path, tables | {"shift": VFT_CARD["shift"]})
    new = read_back(convert_card(card, "wlf", units=(STRESS["Pa"], TEMPERATURE["K"])), tmp_path)
    assert_same_material(new.material(), card.material())


def test_an_exact_card_says_what_it_was_made_from(tmp_path):
    converted = convert_card(read(tmp_path, SOUND), "vft", T_ref=373.15)
    made_from = {"card": "sealing resin", "revision": "2", "law": "wlf", "exact": True}
    assert converted.tables["made_from"] == made_from
    new = read_back(converted, tmp_path)
    assert new.document.made_from is not None
    again = convert_card(new, "wlf")
    assert again.tables["made_from"] == made_from | {"law": "vft"}


def test_an_inexact_card_says_so_with_its_largest_error_and_range(tmp_path):
    card = read(tmp_path, changed({"shift.measured": [60.0, 130.0], "shift.outside": "hold"}))
    converted = convert_card(card, "arrhenius")
    made_from = converted.tables["made_from"]
    assert made_from["exact"] is converted.conversion.exact is False
    assert made_from["range"] == [60.0, 130.0]
    new = read_back(converted, tmp_path)
    T = np.linspace(333.15, 403.15, 2001)
    difference = np.abs(new.material().shift.ln_shift(T) - card.material().shift.ln_shift(T)) / LN10
    # a grid of 0.035 K misses the largest error by its curvature, 1e-6 of it at the most
    assert made_from["largest_error_decades"] == pytest.approx(difference.max(), rel=1e-4)
    assert made_from["error_at"] == pytest.approx(T[difference.argmax()] - 273.15, abs=0.1)
    assert made_from["largest_error_decades"] > 0.01


def test_what_a_narrow_range_leaves_out_of_the_service_window_is_told(tmp_path):
    card = read(tmp_path, SOUND)  # service from 60 to 110 degC
    cold, hot = card.service_temperature
    for T_ref in (None, 350.0):
        narrow = convert_card(card, "arrhenius", T_range=(353.15, 363.15), T_ref=T_ref)
        decades, at = narrow.service_error
        assert at in (cold, hot)
        old, new = card.material(), read_back(narrow, tmp_path / "new").material()
        # times that belong together: the new relaxation times have moved with the reference
        moved = np.log(new.shear.times / old.shear.times)[0]
        apart = abs(float(new.shift.ln_shift(at) + moved - old.shift.ln_shift(at))) / LN10
        assert decades == pytest.approx(apart, rel=1e-9)
        assert decades > narrow.conversion.largest_error_decades
    assert convert_card(card, "arrhenius").service_error is None  # the measured range holds the window
    assert convert_card(card, "vft", T_range=(353.15, 363.15)).service_error is None
    cold_card = changed({"service.temperature": [-200.0, 110.0]})
    assert convert_card(read(tmp_path, cold_card), "arrhenius").service_error is None  # the pole: a law has no answer


def test_the_range_of_an_inexact_conversion_is_the_one_asked_for_or_measured_or_of_service(tmp_path):
    def fitted(tables, **options):
        low, high = convert_card(read(tmp_path, tables), "arrhenius", **options).tables["made_from"]["range"]
        return low, high

    assert fitted(SOUND, T_range=(333.15, 373.15)) == (60.0, 100.0)
    assert fitted(SOUND) == (-40.0, 130.0)
    without = changed({"shift.measured": GONE, "shift.outside": GONE})
    assert fitted(without) == (60.0, 110.0)
    with pytest.raises(ConversionError, match="give the temperature range"):
        fitted(changed({"service": GONE}, without))


def test_a_table_samples_the_law_where_it_is_told_to(tmp_path):
    card = read(tmp_path, ARRHENIUS_CARD)
    converted = convert_card(card, "table", T_range=(333.15, 373.15), points=3)
    points = converted.shift["points"]
    assert [T for T, _ in points] == [60.0, 80.0, 100.0]
    B = 120e3 / 8.314462618 / LN10
    for T, log10_a in points:
        assert log10_a == pytest.approx(B * (1.0 / (T + 273.15) - 1.0 / 353.15), rel=1e-11, abs=1e-14)
    assert not converted.conversion.exact
    assert read_back(converted, tmp_path).document.shift["law"] == "table"


def test_a_conversion_that_does_not_exist_is_refused(tmp_path):
    card = read(tmp_path, SOUND)
    with pytest.raises(ConversionError, match="cannot be written as 'polynomial'"):
        convert_card(card, "polynomial")
    with pytest.raises(ConversionError, match="two stress units: GPa and psi; give one"):
        convert_card(card, "wlf", units=(STRESS["GPa"], STRESS["psi"]))


def test_a_card_that_is_no_material_is_not_converted(tmp_path):
    with pytest.raises(FileError, match=r"shift\.C1"):
        convert_card(read(tmp_path, changed({"shift.C1": -1.0})), "vft")


def test_a_card_that_could_not_be_read_again_is_not_made(tmp_path):
    card = read(tmp_path, changed({"shift.C2": 61.0, "shift.measured": GONE, "shift.outside": GONE}))
    with pytest.raises(
        ConversionError, match=r"the converted card would be none: prony\.shear\[1\]\[1\]: found .*e\+2"
    ):
        convert_card(card, "wlf", T_ref=273.15 + 22.0)  # 10^(14.2 x 58/3) times slower


def test_a_crossover_keeps_neat_temperatures(tmp_path):
    shift = {
        "law": "crossover",
        "at": 80.0,
        "below": {"law": "arrhenius", "T_ref": 80.0, "activation_energy": 300.0},
        "above": {"law": "wlf", "T_ref": 80.0, "C1": 14.2, "C2": 161.0},
    }
    card = read(tmp_path, changed({"shift": shift}))
    converted = convert_card(card, "crossover", units=(TEMPERATURE["degF"],))
    assert (converted.shift["at"], converted.shift["T_ref"], converted.shift["above"]["T_ref"]) == (176.0, 176.0, 176.0)
    assert_same_material(read_back(converted, tmp_path).material(), card.material())
