import math

import numpy as np
import pytest
from hypothesis import given, settings

from matlib.errors import FileError
from matlib.shift import WLF, MeasuredRange, NoShift
from tests.cards import GONE, SOUND, changed, read
from tests.strategies import DEGREE_IN_K, STRESS_IN_PA, TIME_IN_S, card_tables

ROUNDING = 1e-14  # a handful of operations between a number in a file and one in SI units

# G = 1000 and K = 3000; shear terms 0.25 and 0.5, bulk term 0.2, or the moduli 250, 500 and 600.
BY_HAND = [
    pytest.param("instantaneous", "instantaneous", 250.0, [250.0, 500.0], 2400.0, [600.0], id="both instantaneous"),
    pytest.param(
        "long-term", "instantaneous", 1000.0, [1000.0, 2000.0], 3000.0, [750.0], id="long-term, of instantaneous"
    ),
    pytest.param(
        "instantaneous",
        "long-term",
        1000.0 / 1.75,
        [250.0 / 1.75, 500.0 / 1.75],
        2500.0,
        [500.0],
        id="instantaneous, of long-term",
    ),
    pytest.param("long-term", "long-term", 1000.0, [250.0, 500.0], 3000.0, [600.0], id="both long-term"),
    pytest.param("instantaneous", "absolute", 250.0, [250.0, 500.0], 2400.0, [600.0], id="instantaneous, moduli"),
    pytest.param("long-term", "absolute", 1000.0, [250.0, 500.0], 3000.0, [600.0], id="long-term, moduli"),
]


@pytest.mark.parametrize("stress", STRESS_IN_PA)
@pytest.mark.parametrize(("state", "relative_to", "G_inf", "G", "K_inf", "K"), BY_HAND)
def test_every_state_base_and_stress_unit_gives_the_moduli_worked_out_by_hand(
    tmp_path, stress, state, relative_to, G_inf, G, K_inf, K
):
    shear, bulk = ([250.0, 500.0], [600.0]) if relative_to == "absolute" else ([0.25, 0.5], [0.2])
    prony = {"relative_to": relative_to, "shear": [[2.0, shear[0]], [7.0, shear[1]]], "bulk": [[3.0, bulk[0]]]}
    elastic = {"G": 1000.0, "K": 3000.0, "state": state}
    material = read(tmp_path, changed({"units.stress": stress, "elastic": elastic, "prony": prony})).material()
    unit = STRESS_IN_PA[stress]
    assert material.shear.equilibrium == pytest.approx(G_inf * unit, rel=ROUNDING)
    assert material.bulk.equilibrium == pytest.approx(K_inf * unit, rel=ROUNDING)
    np.testing.assert_allclose(material.shear.moduli, np.array(G) * unit, rtol=ROUNDING)
    np.testing.assert_allclose(material.bulk.moduli, np.array(K) * unit, rtol=ROUNDING)
    np.testing.assert_allclose(material.shear.times, [2.0, 7.0], rtol=ROUNDING)


# E = 2000, nu = 0.25, so G = 800, K = 4000/3 and 9 K = 12000; the one term takes half of E, or as much again.
@pytest.mark.parametrize(
    ("state", "lateral", "shear", "bulk"),
    [
        # with nu constant all three moduli halve, at the time of the term
        ("instantaneous", "constant nu", (400.0, 400.0, 5.0), (2000.0 / 3.0, 2000.0 / 3.0)),
        ("long-term", "constant nu", (800.0, 800.0, 5.0), (4000.0 / 3.0, 4000.0 / 3.0)),
        # with K constant G = 3 K E/(9 K - E) at both ends, and the time falls by (9 K - E_0)/(9 K - E_inf)
        ("instantaneous", "constant K", (4000.0 / 11.0, 800.0 - 4000.0 / 11.0, 5.0 * 10.0 / 11.0), (4000.0 / 3.0, 0.0)),
        ("long-term", "constant K", (800.0, 2000.0 - 800.0, 5.0 * 8.0 / 10.0), (4000.0 / 3.0, 0.0)),
    ],
)
def test_youngs_modulus_becomes_shear_and_bulk_as_worked_out_by_hand(tmp_path, state, lateral, shear, bulk):
    prony = {"relative_to": "instantaneous", "young": [[5.0, 0.5]], "lateral": lateral}
    elastic = {"E": 2000.0, "nu": 0.25, "state": state}
    material = read(tmp_path, changed({"elastic": elastic, "prony": prony})).material()
    equilibrium, relaxing, time = shear
    assert material.shear.equilibrium == pytest.approx(equilibrium * 1e6, rel=1e-13)  # by way of a difference of moduli
    np.testing.assert_allclose(material.shear.moduli, [relaxing * 1e6], rtol=1e-13)
    np.testing.assert_allclose(material.shear.times, [time], rtol=1e-13)
    assert material.bulk.equilibrium == pytest.approx(bulk[0] * 1e6, rel=1e-13)
    assert math.fsum(material.bulk.moduli) == pytest.approx(bulk[1] * 1e6, rel=1e-13)


@pytest.mark.parametrize("temperature", DEGREE_IN_K)
@pytest.mark.parametrize("time", TIME_IN_S)
def test_every_time_and_temperature_unit_is_converted(tmp_path, time, temperature):
    T_ref = {"K": 300.0, "degC": 26.85, "degF": 80.33}[temperature]  # one temperature in three units
    C2 = {"K": 50.0, "degC": 50.0, "degF": 90.0}[temperature]
    ends = {"K": [280.0, 320.0], "degC": [6.85, 46.85], "degF": [44.33, 116.33]}[temperature]
    card = read(
        tmp_path,
        changed(
            {
                "units.time": time,
                "units.temperature": temperature,
                "shift": {"law": "wlf", "T_ref": T_ref, "C1": 10.0, "C2": C2, "measured": ends, "outside": "hold"},
                "service": {"temperature": ends, "time": [2.0, 3.0]},
            }
        ),
    )
    material = card.material()
    np.testing.assert_allclose(material.bulk.times, [TIME_IN_S[time]], rtol=ROUNDING)
    assert isinstance(material.shift, MeasuredRange)
    law = material.shift.law
    assert isinstance(law, WLF)
    assert (law.T_ref, law.C1, law.C2) == pytest.approx((300.0, 10.0, 50.0), rel=ROUNDING)
    assert (material.shift.low, material.shift.high) == pytest.approx((280.0, 320.0), rel=ROUNDING)
    assert material.shift.outside == "hold"
    assert material.expansion == pytest.approx(6.2e-5 / DEGREE_IN_K[temperature], rel=ROUNDING)
    assert card.service_temperature == pytest.approx((280.0, 320.0), rel=ROUNDING)
    assert card.service_time == pytest.approx((2.0 * TIME_IN_S[time], 3.0 * TIME_IN_S[time]), rel=ROUNDING)
    assert card.shift().T_ref == material.shift.T_ref


@pytest.mark.parametrize("pair", [("E", "G"), ("E", "K"), ("E", "nu"), ("G", "K"), ("G", "nu"), ("K", "nu")])
def test_any_two_elastic_constants_will_do(tmp_path, pair):
    values = {"E": 2000.0, "G": 800.0, "K": 4000.0 / 3.0, "nu": 0.25}
    elastic = {name: values[name] for name in pair} | {"state": "instantaneous"}
    material = read(tmp_path, changed({"elastic": elastic})).material()
    assert material.shear.instantaneous == pytest.approx(800e6, rel=1e-13)
    assert material.bulk.instantaneous == pytest.approx(4000e6 / 3.0, rel=1e-13)


def test_what_is_left_out_is_elastic_and_does_not_expand(tmp_path):
    tables = {key: SOUND[key] for key in ("name", "units", "elastic")} | {"shift": {"law": "none"}}
    card = read(tmp_path, tables)
    material = card.material()
    assert material.shear.times.size == material.bulk.times.size == 0
    assert isinstance(material.shift, NoShift)
    assert material.expansion == 0.0
    assert card.service_temperature is card.service_time is None
    assert card.name == "sealing resin"
    for kept, left in (("shear", "bulk"), ("bulk", "shear")):
        material = read(tmp_path, changed({f"prony.{left}": GONE})).material()
        assert getattr(material, kept).times.size > 0
        assert getattr(material, left).times.size == 0


def test_a_liquid_keeps_no_stiffness_at_all(tmp_path):
    material = read(tmp_path, changed({"prony.shear": [[1.0, 0.1], [2.0, 0.2], [3.0, 0.7]]})).material()
    assert material.shear.equilibrium == 0.0


def test_a_card_is_named_with_its_revision_and_its_file(tmp_path):
    card = read(tmp_path, SOUND)
    assert (card.name, card.file) == ("sealing resin, revision 2", str(tmp_path / "a.card.toml"))


@settings(max_examples=200)
@given(tables=card_tables())
def test_a_material_has_the_elastic_constants_of_the_state_that_its_card_gives_them_for(tmp_path_factory, tables):
    card = read(tmp_path_factory.getbasetemp(), tables)
    material = card.material()
    ends = [(series.instantaneous, series.equilibrium) for series in (material.shear, material.bulk)]
    (G, K) = (end[0 if tables["elastic"]["state"] == "instantaneous" else 1] for end in ends)
    found = {"E": 9.0 * K * G / (3.0 * K + G), "G": G, "K": K, "nu": (3.0 * K - 2.0 * G) / (2.0 * (3.0 * K + G))}
    unit = STRESS_IN_PA[tables["units"]["stress"]]
    for name, value in card.document.elastic.given.items():
        # nu and K lose digits as nu nears 0.5: 1/(1 - 2 nu) is at most 25 here
        assert found[name] == pytest.approx(value * (1.0 if name == "nu" else unit), rel=1e-11)


# What a card may get wrong and still be a card: key, found, expected and hint of what keeps it from being a material
NOT_A_MATERIAL = [
    ({"elastic.nu": 0.5}, ("elastic.nu", "0.5", "above -1 and below 0.5", "")),
    ({"elastic.E": -1.0}, ("elastic.E", "-1", "a modulus > 0", "")),
    ({"prony.bulk": [[0.0, 0.1]]}, ("prony.bulk[1]", "0", "a relaxation time > 0", "")),
    ({"prony.shear": [[1.0, 0.1], [2.0, -0.1]]}, ("prony.shear[2]", "-0.1", "a fraction > 0", "")),
    (
        {"prony": {"relative_to": "absolute", "bulk": [[1.0, -5.0]]}},
        ("prony.bulk[1]", "-5", "a modulus > 0", ""),
    ),
    (
        {"prony.bulk": [[1.0, 0.6], [2.0, 0.6]]},
        ("prony.bulk", "fractions with a sum of 1.2", "a sum of at most 1", "look at prony.relative_to"),
    ),
    (
        {"elastic.state": "long-term", "prony.bulk": [[1.0, 0.5], [2.0, 0.5]]},
        (
            "prony.bulk",
            "fractions with a sum of 1",
            "a sum < 1, since the elastic constants are the long-term ones",
            'write state = "instantaneous" with instantaneous constants',
        ),
    ),
    (
        {"prony": {"relative_to": "absolute", "young": [[1.0, 3100.0]], "lateral": "constant nu"}},
        (
            "prony.young",
            "moduli with a sum of 3100",
            "a sum of at most 3000, the instantaneous modulus",
            "look at prony.relative_to",
        ),
    ),
    (
        # K = 3000/(3 x 0.3) and 9 K = 30000, which E passes at once if it relaxes to a twentieth
        {
            "elastic.state": "long-term",
            "prony": {"relative_to": "instantaneous", "young": [[1.0, 0.95]], "lateral": "constant K"},
        },
        (
            "prony.lateral",
            '"constant K" with an instantaneous E of 60000 MPa',
            "E below 9 K = 30000 MPa",
            'write lateral = "constant nu", or look at elastic.state',
        ),
    ),
    ({"shift.C1": 0.0}, ("shift.C1", "0", "a number > 0", "")),
    ({"shift.T_ref": -300.0}, ("shift.T_ref", "-300", "above absolute zero, -273.15 degC", "")),
    (
        {"shift.measured": [-300.0, 80.0]},
        ("shift.measured", "[-300.0, 80.0]", "above absolute zero, -273.15 degC", ""),
    ),
    (
        {"shift": {"law": "vft", "T_ref": 80.0, "T_inf": 90.0, "B": 1000.0}},
        ("shift.T_inf", "90 degC", "below T_ref = 80 degC", ""),
    ),
    (
        {"shift": {"law": "table", "T_ref": 20.0, "points": [[20.0, 0.0], [30.0, -1.0], [20.0, 1.0]]}},
        ("shift.points", "20 degC 2 times", "each temperature once", ""),
    ),
    (
        {"shift": {"law": "table", "T_ref": 20.0, "points": [[20.0, 0.0], [-400.0, 1.0]]}},
        ("shift.points[2]", "-400", "above absolute zero, -273.15 degC", ""),
    ),
    (
        {
            "shift": {
                "law": "crossover",
                "at": 20.0,
                "below": {"law": "arrhenius", "T_ref": 20.0, "activation_energy": -1.0},
                "above": {"law": "none"},
            }
        },
        ("shift.below.activation_energy", "-1", "a number > 0", ""),
    ),
]


@pytest.mark.parametrize(("changes", "fault"), NOT_A_MATERIAL, ids=[case[1][0] for case in NOT_A_MATERIAL])
def test_constants_that_are_no_material_are_named_in_the_keys_and_units_of_the_file(tmp_path, changes, fault):
    card = read(tmp_path, changed(changes))
    with pytest.raises(FileError) as caught:
        card.material()
    (found,) = caught.value.faults
    assert (found.key, found.found, found.expected, found.hint) == fault
    assert str(caught.value).startswith(f"{card.file}: {fault[0]}: found {fault[1]}, expected {fault[2]}")


def test_everything_that_keeps_a_card_from_being_a_material_is_said_at_once(tmp_path):
    card = read(tmp_path, changed({"elastic.nu": 0.7, "prony.bulk": [[1.0, 1.5]], "shift.C2": -1.0}))
    with pytest.raises(FileError) as caught:
        card.material()
    assert {fault.key for fault in caught.value.faults} == {"elastic.nu", "prony.bulk", "shift.C2"}


def test_moduli_are_not_compared_with_elastic_constants_that_are_none(tmp_path):
    prony = {"relative_to": "absolute", "shear": [[1.0, 1e9]]}
    with pytest.raises(FileError) as caught:
        read(tmp_path, changed({"elastic.nu": 0.7, "prony": prony})).material()
    assert [fault.key for fault in caught.value.faults] == ["elastic.nu"]


def test_a_crossover_whose_laws_do_not_reach_each_other_is_no_material(tmp_path):
    wlf = {"law": "wlf", "T_ref": 80.0, "C1": 10.0, "C2": 30.0}  # its pole lies at 50 degC
    card = read(tmp_path, changed({"shift": {"law": "crossover", "at": 40.0, "below": wlf, "above": wlf}}))
    with pytest.raises(FileError, match=r"shift: found .*at or below the pole T_inf = 323.15 K \(50 degC\)"):
        card.material()
    with pytest.raises(FileError, match="at or below the pole"):
        card.shift()


# What makes a file no card: key, and what is found and expected there
NOT_A_CARD = [
    ({"name": GONE}, "name", "nothing", "the card's name"),
    ({"name": ""}, "name", "''", "text that is not empty"),
    ({"units.stress": "bar"}, "units.stress", "'bar'", "one of 'Pa', 'kPa', 'MPa', 'GPa', 'psi' or 'ksi'"),
    ({"units.time": GONE}, "units.time", "nothing", "a time unit: s, ms, us, min, h, d"),
    ({"units": GONE}, "units", "nothing", "a table [units] with stress, time and temperature"),
    ({"elastic.state": "glassy"}, "elastic.state", "'glassy'", "one of 'instantaneous' or 'long-term'"),
    ({"elastic.E": "3000"}, "elastic.E", "'3000'", "a number"),
    ({"elastic.E": 1e61}, "elastic.E", "1e+61", "a number <= 1e+60"),
    ({"elastic.K": 3000.0}, "elastic", "E, K, nu", "exactly two of E, G, K, nu"),
    ({"elastic.nu": GONE}, "elastic", "E", "exactly two of E, G, K, nu"),
    ({"elastic": {"state": "long-term"}}, "elastic", "nothing", "exactly two of E, G, K, nu"),
    ({"prony.relative_to": GONE}, "prony.relative_to", "nothing", '"instantaneous", "long-term" or "absolute"'),
    ({"prony.shear": []}, "prony.shear", "[]", "at least 1 entries"),
    ({"prony.shear": [[1.0]]}, "prony.shear[1]", "[1.0]", "at least 2 entries"),
    ({"prony.shear": [[1.0, 0.1], [1.0, True]]}, "prony.shear[2][2]", "True", "a number"),
    ({"prony.young": [[1.0, 0.1]], "prony.lateral": "constant nu"}, "prony", "young beside shear or bulk", "either"),
    ({"prony": {"relative_to": "absolute", "young": [[1.0, 5.0]]}}, "prony.lateral", "nothing", '"constant nu" or'),
    ({"prony.lateral": "constant K"}, "prony.lateral", "'constant K'", "no such key without young"),
    ({"prony": {"relative_to": "absolute"}}, "prony", "no series", "shear, bulk or young"),
    ({"shift": GONE}, "shift", "nothing", 'a table [shift]; law = "none" where temperature does not matter'),
    ({"shift.law": GONE}, "shift.law", "nothing", "one of none, wlf, arrhenius, vft, polynomial, table, crossover"),
    ({"shift.law": "wlff"}, "shift.law", "'wlff'", "one of none, wlf, arrhenius, vft, polynomial, table, crossover"),
    ({"shift.base": 2}, "shift.base", "2", "one of 10 or 'e'"),
    ({"shift.C2": GONE}, "shift.C2", "nothing", "the constant C2, a temperature difference"),
    ({"shift.D": 1.0}, "shift.D", "1.0", "one of the keys C1, C2, T_ref, base, law"),
    ({"shift.measured": [5.0, 5.0]}, "shift.measured", "[5.0, 5.0]", "the lower temperature, then the higher"),
    ({"shift.measured": GONE, "shift.outside": "hold"}, "shift.measured", "nothing", "[lower, higher] temperature"),
    ({"shift.outside": "clamp"}, "shift.outside", "'clamp'", "one of 'extrapolate', 'refuse' or 'hold'"),
    ({"expansion": {}}, "expansion.alpha", "nothing", "the linear expansion coefficient per temperature unit"),
    ({"service.temperature": [50.0, 20.0]}, "service.temperature", "[50.0, 20.0]", "the smaller value first"),
    ({"service.time": [0.0, 2.0]}, "service.time", "[0.0, 2.0]", "[shortest, longest], both > 0"),
    ({"service.temperature": [-500.0, 2.0]}, "service.temperature", "[-500.0, 2.0]", "above absolute zero, -273.15"),
    ({"colour": "red"}, "colour", "'red'", "one of the keys elastic, expansion, made_from, name"),
]


@pytest.mark.parametrize(
    ("changes", "key", "found", "expected"), NOT_A_CARD, ids=[f"{case[1]} {case[2]}" for case in NOT_A_CARD]
)
def test_what_is_no_card_is_refused_with_file_key_what_was_found_and_what_is_expected(
    tmp_path, changes, key, found, expected
):
    with pytest.raises(FileError) as caught:
        read(tmp_path, changed(changes))
    (fault,) = caught.value.faults
    assert (caught.value.file, fault.key, fault.found) == (str(tmp_path / "a.card.toml"), key, found)
    assert fault.expected.startswith(expected)
    assert str(caught.value).startswith(f"{tmp_path / 'a.card.toml'}: {key}: found {found}, expected {expected}")


def test_all_faults_of_a_file_are_reported_at_once(tmp_path):
    changes = {
        "name": 3,
        "units.stress": "bar",
        "prony.relative_to": "glass",
        "shift.C1": "x",
        "shift.outside": "clamp",
        "service.time": [1.0],
        "colour": "red",
    }
    with pytest.raises(FileError) as caught:
        read(tmp_path, changed(changes))
    assert {fault.key for fault in caught.value.faults} == set(changes)
    assert all(line.startswith(f"{tmp_path / 'a.card.toml'}: ") for line in caught.value.lines())


def test_contradicting_tables_are_reported_at_once_and_beside_a_wrong_law(tmp_path):
    changes = {
        "elastic.K": 1.0,
        "prony.lateral": "constant K",
        "service": {"temperature": [5.0, 1.0], "time": [5.0, 1.0]},
        "shift.law": "wlff",
    }
    with pytest.raises(FileError) as caught:
        read(tmp_path, changed(changes))
    keys = {fault.key for fault in caught.value.faults}
    assert keys == {"elastic", "prony.lateral", "service.temperature", "service.time", "shift.law"}


def test_faults_on_both_sides_of_a_crossover_are_reported_at_once(tmp_path):
    shift = {"law": "crossover", "at": 20.0, "below": {"law": "wlf"}, "above": {"law": "crossover"}}
    with pytest.raises(FileError) as caught:
        read(tmp_path, changed({"shift": shift}))
    keys = [fault.key for fault in caught.value.faults]
    assert keys == ["shift.below.T_ref", "shift.below.C1", "shift.below.C2", "shift.above.law"]
