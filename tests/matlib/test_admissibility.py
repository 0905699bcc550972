import pytest
from hypothesis import given, settings

from matlib.admissibility import check_card, is_admissible
from matlib.finding import Finding
from tests.cards import GONE, changed, read
from tests.strategies import card_tables

WLF_BELOW = {"law": "wlf", "T_ref": 80.0, "C1": 14.2, "C2": 161.0}
FALLING = {"law": "table", "T_ref": 80.0, "points": [[50.0, 3.0], [80.0, 0.0], [120.0, -3.0]]}
RISING = {"law": "table", "T_ref": 80.0, "points": [[50.0, 3.0], [80.0, 0.0], [90.0, 0.5], [120.0, -3.0]]}
# log10 a_T turns where -0.1 + 2 x 1e-3 x = 0, 50 K above T_ref
TURNING = {"law": "polynomial", "T_ref": 80.0, "coefficients": [-0.1, 1e-3]}
NARROW = {"prony.shear": [[1e-2, 0.2], [1.0, 0.3], [1e2, 0.2]]}


def findings(folder, changes):
    return check_card(read(folder, changed(changes)))


def test_there_is_nothing_to_say_about_a_sound_card(tmp_path):
    assert findings(tmp_path, {}) == []
    assert is_admissible([])


# Each finding: the id, its severity, what makes the sound card give it, and what its message must contain.
TRIGGERS = [
    ("time-not-positive", "error", {"prony.shear": [[-1.0, 0.1]]}, "prony.shear[1]: found -1, expected a relaxation"),
    ("fraction-not-positive", "error", {"prony.bulk": [[1.0, 0.0]]}, "prony.bulk[1]: found 0, expected a fraction > 0"),
    ("fractions-reach-one", "error", {"prony.bulk": [[1.0, 1.1]]}, "prony.bulk: found fractions with a sum of 1.1"),
    (
        "fractions-reach-one",
        "error",
        {"prony": {"relative_to": "absolute", "shear": [[1.0, 2000.0]]}},
        "prony.shear: found moduli with a sum of 2000, expected a sum of at most 1111.11",
    ),
    ("elastic-constants", "error", {"elastic.nu": 0.6}, "elastic.nu: found 0.6, expected above -1 and below 0.5"),
    ("elastic-constants", "error", {"elastic.E": -3.0}, "elastic.E: found -3, expected a modulus > 0"),
    (
        "prony-series",
        "error",
        {
            "elastic.state": "long-term",
            "prony": {"relative_to": "instantaneous", "young": [[1.0, 0.95]], "lateral": "constant K"},
        },
        'prony.lateral: found "constant K"',
    ),
    ("constant-sign", "error", {"shift.C2": -5.0}, "shift.C2: found -5, expected a number > 0"),
    ("below-absolute-zero", "error", {"shift.T_ref": -280.0}, "shift.T_ref: found -280, expected above absolute zero"),
    (
        "shift-law",
        "error",
        {"shift": {"law": "vft", "T_ref": 80.0, "T_inf": 90.0, "B": 1000.0}},
        "shift.T_inf: found 90 degC, expected below T_ref = 80 degC",
    ),
    (
        "shift-law",
        "error",
        {"shift": {"law": "crossover", "at": -90.0, "below": {"law": "none"}, "above": WLF_BELOW}},
        "at or below the pole T_inf = 192.15 K (-81 degC)",
    ),
    (
        "times-equal",
        "warning",
        {"prony.shear": [[1e-6, 0.1], [1.0, 0.1], [1e8, 0.1], [1.0, 0.2], [1.0, 0.2]]},
        "prony.shear: 3 terms share the relaxation time 1; merge them",
    ),
    (
        "no-long-term-stiffness",
        "warning",
        {"prony.shear": [[1e-6, 0.5], [1e8, 0.5]]},
        "shear: the fractions reach 1, so no long-term stiffness is left",
    ),
    # no stiffness in volume is left beside some in shear; that is one more thing to say
    ("poisson-ratio", "error", {"prony.bulk": [[1.0, 1.0]]}, "leaves (-1, 0.5): -1, below -1, "),
    ("table-not-monotone", "error", {"shift": RISING}, "does not fall from 0 at 353.15 K (80 degC) to 0.5 at 363.15 K"),
    (
        "table-reference",
        "error",
        {"shift": FALLING | {"T_ref": 120.0}},
        "log10 a_T is -3 at T_ref = 393.15 K (120 degC), not 0",
    ),
    (
        "table-reference",
        "error",
        {"shift": FALLING | {"T_ref": 12000.0}, "service": GONE},
        "1/a_T overflows",
    ),
    (
        "polynomial-not-monotone",
        "error",
        {"shift": TURNING, "service.temperature": [60.0, 140.0]},
        "turns at 403.15 K (130 degC), inside the service window",
    ),
    (
        "polynomial-not-monotone",
        "error",
        {"shift": TURNING | {"coefficients": [0.1]}},
        "does not fall, inside the service window",
    ),
    (
        "polynomial-not-monotone",
        "error",
        {"shift": TURNING | {"coefficients": [0.1]}, "service": GONE},
        "does not fall, beside T_ref",
    ),
    (
        "pole-in-service",
        "error",
        {"shift.measured": [-200.0, 130.0], "service.temperature": [-91.0, 110.0]},
        "pole T_inf = 192.15 K (-81 degC) lies 10 K above the lowest service temperature 182.15 K (-91 degC)",
    ),
    (
        "pole-near-service",
        "warning",
        {
            "shift.C1": 0.5,
            "shift.measured": [-200.0, 130.0],
            "service": {"temperature": [-71.0, 110.0], "time": [1e3, 1e4]},
        },
        "is 10 K above the pole 192.15 K (-81 degC)",
    ),
    (
        "beyond-measured-range",
        "warning",
        {"service.temperature": [60.0, 150.0]},
        "423.15 K (150 degC) lies 20 K above the measured range; a_T is extrapolated there",
    ),
    (
        "beyond-measured-range",
        "warning",
        {"shift.measured": [70.0, 130.0], "shift.outside": "hold"},
        "333.15 K (60 degC) lies 10 K below the measured range; a_T is held there",
    ),
    (
        "beyond-measured-range",
        "error",
        {"shift.measured": [70.0, 130.0], "shift.outside": "refuse"},
        "333.15 K (60 degC) lies 10 K below the measured range; the law refuses there",
    ),
    (
        "reference-beyond-measured",
        "warning",
        {"shift.measured": [50.0, 70.0], "service.temperature": [55.0, 65.0]},
        "T_ref = 353.15 K (80 degC) lies outside the measured range",
    ),
    # the polynomial falls by 0.1 a kelvin, and at 4000 degC by 392 decades
    (
        "no-shift-factor",
        "error",
        {"shift": TURNING | {"coefficients": [-0.1]}, "service.temperature": [60.0, 4000.0]},
        "1/a_T overflows",
    ),
    # a_T is 1 there: 1e-4 s is two decades shorter than the fastest term, 1e-2 s
    (
        "beyond-short-times",
        "note",
        NARROW | {"service": {"temperature": [80.0, 80.0], "time": [1e-4, 1.0]}},
        "the shortest service time at 353.15 K (80 degC) is 2 decades shorter than the shortest relaxation time",
    ),
    (
        "beyond-long-times",
        "warning",
        NARROW | {"service": {"temperature": [80.0, 80.0], "time": [1.0, 1e5]}},
        "the longest service time at 353.15 K (80 degC) is 3 decades longer than the longest relaxation time; it "
        "answers with its long-term moduli there",
    ),
    ("service-not-stated", "note", {"service": GONE}, "no [service] table"),
    ("base-not-stated", "note", {"shift.base": GONE}, "C1 belongs to log10 a_T"),
    ("expansion-not-stated", "note", {"expansion": GONE}, "thermal strain is taken as 0"),
    ("expansion-too-large", "warning", {"expansion.alpha": 62.0}, "expansion.alpha is 62 1/K, more than 0.001 1/K"),
    (
        "hardly-relaxes",
        "warning",
        # shear terms of 1e-4 of the modulus, as where its two columns are exchanged
        {"prony.shear": [[1e-6, 1e-4], [1.0, 1e-4], [1e8, 1e-4]]},
        "all terms together carry 0.03 % of the modulus",
    ),
]


@pytest.mark.parametrize(
    ("name", "severity", "changes", "message"), TRIGGERS, ids=[f"{case[0]} {k}" for k, case in enumerate(TRIGGERS)]
)
def test_a_card_that_has_one_thing_wrong_gives_that_finding_and_no_other(tmp_path, name, severity, changes, message):
    found = findings(tmp_path, changes)
    # what goes without saying beside the finding: that the window is missing, that nothing is left of the bulk modulus
    beside = {"table-reference": "service-not-stated", "polynomial-not-monotone": "service-not-stated"}
    beside |= {"poisson-ratio": "no-long-term-stiffness"}
    said = [finding for finding in found if finding.id != beside.get(name)]
    assert {finding.id for finding in said} == {name}
    assert all(finding.severity == severity for finding in said)
    assert any(message in finding.message for finding in said)
    assert all(finding.message.endswith(".") for finding in said)
    assert is_admissible(found) is (severity != "error")


def test_findings_come_with_the_worst_first_and_all_at_once(tmp_path):
    changes = {
        "elastic.nu": 0.6,
        "prony.shear": [[1.0, 0.1], [1.0, 0.1], [2.0, -0.1]],
        "shift.C1": 0.0,
        "service": GONE,
    }
    found = findings(tmp_path, changes)
    assert {finding.id for finding in found} == {
        "elastic-constants",
        "fraction-not-positive",
        "constant-sign",
        "times-equal",
    }
    assert [finding.severity for finding in found] == ["error"] * 3 + ["warning"]


def test_only_an_error_makes_a_card_inadmissible():
    warning, note = (Finding(id="x", severity=severity, message="") for severity in ("warning", "note"))
    assert is_admissible([warning, note])
    assert not is_admissible([warning, Finding(id="x", severity="error", message="")])


def test_poisson_ratio_stays_in_its_range_however_far_apart_shear_and_bulk_relax(tmp_path):
    # 1/2 - nu and 1 + nu are convolutions of a positive modulus with a rising compliance, so they are positive
    prony: dict = {"relative_to": "instantaneous"}
    service = {"temperature": [80.0, 80.0], "time": [1.0, 2.0]}
    for times in ((1e2, 1e-2), (1e-2, 1e2)):
        prony |= {"shear": [[times[0], 0.99]], "bulk": [[times[1], 0.999]]}
        assert findings(tmp_path, {"prony": prony, "service": service}) == []


@pytest.mark.parametrize("side", ["below", "above"])
@pytest.mark.parametrize("law", [RISING, TURNING, FALLING | {"T_ref": 120.0}], ids=["table", "polynomial", "not zero"])
def test_a_part_of_a_crossover_is_looked_at_only_where_it_is_used(tmp_path, side, law):
    other = "above" if side == "below" else "below"
    # the table rises from 80 to 90 degC, the polynomial turns at 130 degC; the laws meet at 85 or at 75 degC
    shift = {"law": "crossover", "at": 75.0, side: law, other: WLF_BELOW}
    window = [60.0, 110.0] if law is not TURNING else [60.0, 140.0]
    ids = {finding.id for finding in findings(tmp_path, {"shift": shift, "service.temperature": window})}
    wrong = {id(RISING): "table-not-monotone", id(TURNING): "polynomial-not-monotone"}.get(id(law))
    assert (wrong in ids) is (side == "above" and wrong is not None)
    assert "table-reference" not in ids


@pytest.mark.parametrize(("outside", "wrong"), [("hold", False), ("refuse", False), ("extrapolate", True)])
def test_a_polynomial_may_turn_where_it_is_held(tmp_path, outside, wrong):
    changes = {"shift": TURNING | {"measured": [40.0, 120.0], "outside": outside}, "service.temperature": [60.0, 140.0]}
    ids = {finding.id for finding in findings(tmp_path, changes)}
    assert ("polynomial-not-monotone" in ids) is wrong


@pytest.mark.parametrize("outside", ["hold", "refuse"])
def test_a_pole_below_the_range_that_a_law_is_used_in_does_not_matter(tmp_path, outside):
    changes = {"shift.outside": outside, "service.temperature": [-100.0, 110.0]}
    ids = {finding.id for finding in findings(tmp_path, changes)}
    assert "beyond-measured-range" in ids
    assert not {"pole-in-service", "pole-near-service"} & ids


def test_a_melt_flows_at_long_times(tmp_path):
    changes = {
        "prony.shear": [[1e-2, 0.5], [1e2, 0.5]],
        "service": {"temperature": [80.0, 80.0], "time": [1.0, 1e5]},
    }
    found = findings(tmp_path, changes)
    assert [finding.id for finding in found] == ["no-long-term-stiffness", "beyond-long-times"]
    assert "it flows without resistance there" in found[1].message


def test_coverage_is_counted_at_the_coldest_and_the_hottest(tmp_path):
    service = {"temperature": [60.0, 110.0], "time": [1e-3, 1e6]}
    long, short = (finding.message for finding in findings(tmp_path, NARROW | {"service": service}))
    # decades: log10(1e-2 a_T / 1e-3) at 60 degC and log10(1e6 / (1e2 a_T)) at 110 degC, with the WLF constants
    assert f"at 333.15 K (60 degC) is {1.0 + 14.2 * 20.0 / 141.0:.3g} decades shorter" in short
    assert f"at 383.15 K (110 degC) is {4.0 + 14.2 * 30.0 / 191.0:.3g} decades longer" in long


@settings(max_examples=100)
@given(tables=card_tables())
def test_a_valid_card_has_no_error(tmp_path_factory, tables):
    found = check_card(read(tmp_path_factory.getbasetemp(), tables))
    assert [finding for finding in found if finding.severity == "error"] == []
    assert ("service-not-stated" in {finding.id for finding in found}) is ("service" not in tables)
