"""The catalogue of slips finds the mistakes that were made on purpose, and claims none where there is none."""

import random

import numpy as np
import pytest

from drivers.battery import battery, card_window
from drivers.studies.slips import CATALOGUE, find_slips
from drivers.studies.slips.evidence import Evidence
from matlib.card import read_card
from matlib.card_conversion import card_text
from tests.drivers.studies.slip_cases import SLIPS, copy_of, random_card, slipped

EACH = 3  # cards an id; 16 an id (208 cards) were run by hand
PAIRS = 10  # cards with two slips; 40 were run by hand
EQUAL = 12  # equal pairs; 50 were run by hand


def evidence_of(card):
    material = card.material()
    window = card_window(card, material)
    return Evidence(temperature=window.temperature, time=window.time, paths=battery(material, window))


def cases(ids, folder, count, first_seed):
    seed = first_seed
    while count:
        pair = slipped(seed, ids, folder)
        seed += 1
        if pair is not None:
            count -= 1
            yield pair


def test_the_catalogue_has_every_id_of_the_design_once():
    assert {kind.id for kind in CATALOGUE} == set(SLIPS)
    assert len(CATALOGUE) == 13


@pytest.mark.parametrize("name", SLIPS)
def test_a_slip_made_on_purpose_is_named_first_or_as_a_declared_twin(name, tmp_path):
    for right, wrong in cases((name,), tmp_path, EACH, first_seed=1000):
        slips = find_slips(right, wrong, evidence_of(right))
        assert slips, f"nothing found for {name}"
        assert name in (slips[0].id, *slips[0].twins)
        assert slips[0].remaining <= 0.05


def test_two_slips_are_named_in_four_of_five_cards(tmp_path):
    draw, seed, hits, count = random.Random(1), 0, 0, 0
    while count < PAIRS:
        seed += 1
        ids = tuple(draw.sample(list(SLIPS), 2))
        pair = slipped(seed, ids, tmp_path)
        if pair is None:
            continue
        count += 1
        right, wrong = pair
        slips = find_slips(right, wrong, evidence_of(right))
        named = [slips[0].id, *slips[0].twins] if slips else []
        hits += any(set(one.split(" + ")) == set(ids) for one in named)
    assert hits >= 0.8 * PAIRS


def test_equal_cards_in_different_forms_have_no_slip(tmp_path):
    for seed in range(EQUAL):
        rng = np.random.default_rng(seed)
        right = random_card(rng, tmp_path, "right")
        same = copy_of(right, rng, tmp_path)
        assert find_slips(right, same, evidence_of(right)) == ()


def test_a_recalibration_is_not_explained_as_a_slip(tmp_path):
    rng = np.random.default_rng(7)
    right = random_card(rng, tmp_path, "right", "wlf")
    tables = right.document.model_dump(exclude_unset=True)
    tables["shift"]["C1"] *= 1.11
    tables["elastic"]["E"] *= 0.93
    tables["prony"]["shear"] = [[t * 1.7, g * 0.9] for t, g in tables["prony"]["shear"]]
    (tmp_path / "new.card.toml").write_text(card_text(tables))
    assert find_slips(right, read_card(tmp_path / "new.card.toml"), evidence_of(right)) == ()


def glass(folder, name, shift, times=(1e-3, 1e-2)):
    """NBS 710 as a card: certificate of 29 June 1962 for Standard Sample 710; the moduli are invented."""
    tables = {
        "name": name,
        "units": {"stress": "GPa", "time": "s", "temperature": "degC"},
        "elastic": {"E": 72.0, "nu": 0.22, "state": "instantaneous"},
        "prony": {"relative_to": "instantaneous", "shear": [[times[0], 0.4], [times[1], 0.5]]},
        "shift": {"T_ref": 821.5, **shift},
        "service": {"temperature": [700.0, 1000.0], "time": [1e-4, 1e4]},
    }
    (folder / f"{name}.card.toml").write_text(card_text(tables))
    return read_card(folder / f"{name}.card.toml")


LN10 = 2.302585092994046
RIGHT = {"law": "vft", "T_inf": 266.0, "B": 4236.118 * LN10}


@pytest.mark.parametrize(
    ("name", "shift"),
    [
        ("log-base", {"law": "vft", "T_inf": 266.0, "B": 4236.118}),  # log10 taken for ln
        ("temperature-unit", {"law": "vft", "T_inf": 266.0 - 273.15, "B": 4236.118 * LN10}),  # degC taken for kelvin
    ],
)
def test_slips_with_the_constants_of_nbs_710_are_named(name, shift, tmp_path):
    right, wrong = glass(tmp_path, "right", RIGHT), glass(tmp_path, "wrong", shift)
    slips = find_slips(right, wrong, evidence_of(right))
    assert name in (slips[0].id, *slips[0].twins)


def test_poise_taken_for_pascal_seconds_is_named(tmp_path):
    """Relaxation times made from the certificate's viscosities: 1 poise = 0.1 Pa s (references: NBS 710 in log10 poise)."""
    right, wrong = glass(tmp_path, "right", RIGHT), glass(tmp_path, "wrong", RIGHT, times=(1e-2, 1e-1))
    slip = find_slips(right, wrong, evidence_of(right))[0]
    assert slip.id == "time-unit"
    assert "poise" in slip.explanation


def test_the_sentence_names_file_key_found_and_fitting_value(tmp_path):
    right, wrong = glass(tmp_path, "right", RIGHT), glass(tmp_path, "wrong", {**RIGHT, "B": 4236.118})
    slip = find_slips(right, wrong, evidence_of(right))[0]
    assert slip.explanation.startswith(f"shift.B of {wrong.file}: found 4236.12, 9754.02 would fit")
    assert "ln 10" in slip.explanation
