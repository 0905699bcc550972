"""Constants of cards side by side."""

import pytest

from drivers.report.constants import constants_table
from matlib.card import read_card
from matlib.card_conversion import convert_card
from tests.drivers.files import CARD


@pytest.fixture
def cards(tmp_path):
    (tmp_path / "a.card.toml").write_text(CARD)
    a = read_card(tmp_path / "a.card.toml")
    (tmp_path / "b.card.toml").write_text(convert_card(a, "vft").text())
    return {"A": a, "B": read_card(tmp_path / "b.card.toml")}


def test_each_card_has_its_numbers_with_their_units_and_nothing_where_it_has_none(cards):
    table = constants_table(cards)
    assert table.headers == ["constant", "A", "unit", "B", "unit"]
    rows = {row[0]: row[1:] for row in table.rows}
    a = cards["A"].document
    assert rows["elastic.E"] == [f"{a.elastic.E:.10g}", a.units.stress, f"{a.elastic.E:.10g}", a.units.stress]
    assert rows["shift.law"] == ["wlf", "", "vft", ""]
    assert rows["shift.C2"] == [f"{cards['A'].law_table.C2:.10g}", "K", "", ""]
    assert rows["shift.B"][:2] == ["", ""]
    assert float(rows["shift.B"][2]) == pytest.approx(cards["B"].law_table.B, rel=1e-9)


def test_what_only_the_second_card_has_stands_with_its_table(cards):
    keys = [row[0] for row in constants_table(cards).rows]
    shift = [number for number, key in enumerate(keys) if key.startswith("shift.")]
    assert {"shift.C1", "shift.T_inf"} <= set(keys)
    assert shift == list(range(shift[0], shift[-1] + 1))


def test_terms_may_be_left_to_a_table_of_their_own(cards):
    with_terms, without = (
        {row[0] for row in constants_table({"value": cards["A"]}, terms=terms).rows} for terms in (True, False)
    )
    assert with_terms - without == {key for key in with_terms if key.startswith("prony.")}
    assert "prony.shear[1].time" in with_terms
