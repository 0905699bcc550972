from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.studies.bench import Bench
from drivers.studies.parts import (
    ELASTIC,
    EXPANSION,
    FRACTIONS,
    PARTS,
    SHIFT,
    TERMS,
    TIMES,
    Form,
    Split,
    differing,
    referred,
    split,
    swapped,
)
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import VFT, WLF
from tests.baselines import recorded, sound
from tests.strategies import COLD, HOT, materials

XI = np.geomspace(1e-8, 1e10, 60)
SPAN = (COLD, HOT)


def assert_same_moduli(a: Material, b: Material) -> None:
    # Fractions and their sum are rounded once each, on up to four terms.
    np.testing.assert_allclose(b.shear.relaxation(XI), a.shear.relaxation(XI), rtol=1e-11)
    np.testing.assert_allclose(b.bulk.relaxation(XI), a.bulk.relaxation(XI), rtol=1e-11)


@given(material=materials(), long_term=st.booleans())
@settings(max_examples=50)
def test_a_material_taken_apart_and_put_together_is_the_same(material: Material, long_term: bool) -> None:
    whole = split(material, Form(long_term=long_term)).material()
    assert_same_moduli(material, whole)
    assert whole.shift is material.shift
    assert whole.expansion == material.expansion


def test_a_material_of_young_at_constant_bulk_modulus_is_the_same_after_being_taken_apart(resin: Material) -> None:
    elastic_bulk = Material(shear=resin.shear, bulk=PronySeries.elastic(3.7e9), shift=resin.shift)
    for long_term in (False, True):
        parts = split(elastic_bulk, Form(long_term=long_term, young=True))
        assert len(parts.spectra) == 1
        # Poles of Young's modulus and back: two root searches, each to rounding.
        np.testing.assert_allclose(parts.material().shear.relaxation(XI), resin.shear.relaxation(XI), rtol=1e-9)


def test_a_liquid_stays_one() -> None:
    liquid = PronySeries.from_fractions(1e9, [0.1, 0.2, 0.7], [1.0, 10.0, 100.0])
    material = Material(shear=liquid, bulk=PronySeries.elastic(3e9), shift=WLF(C1=10.0, C2=50.0, T_ref=350.0))
    assert split(material, Form()).material().shear.equilibrium == 0.0


@given(a=materials(max_terms=3), b=materials(max_terms=3))
@settings(max_examples=40)
def test_all_parts_swapped_make_the_other_material(a: Material, b: Material) -> None:
    one, other = split(a, Form()), split(b, Form())
    assert_same_moduli(b, swapped(one, other, PARTS).material())
    assert_same_moduli(a, swapped(one, other, ()).material())
    assert differing(other, swapped(one, other, PARTS), SPAN) == ()


@pytest.mark.parametrize(
    ("changes", "names"),
    [
        ({}, ()),
        ({"shift.C1": 14.3}, (SHIFT,)),
        ({"shift.T_ref": 81.0}, (SHIFT,)),
        ({"elastic.E": 3001.0}, (ELASTIC,)),
        ({"elastic.nu": 0.36}, (ELASTIC,)),
        ({"expansion.alpha": 6.3e-5}, (EXPANSION,)),
        ({"prony.bulk": [[1.1, 0.1]]}, (TIMES,)),
        ({"prony.bulk": [[1.0, 0.11]]}, (FRACTIONS,)),
        ({"prony.bulk": [[1.0, 0.05], [2.0, 0.05]]}, (TERMS,)),
        ({"elastic.E": 3001.0, "shift.C2": 160.0, "prony.bulk": [[1.1, 0.11]]}, (SHIFT, TIMES, FRACTIONS, ELASTIC)),
    ],
)
def test_parts_that_differ_are_named(changes: dict[str, object], names: tuple[str, ...]) -> None:
    one, other = (split(card.material(), Form()) for card in (sound(), sound(changes)))
    assert differing(one, other, SPAN) == names


def test_one_law_in_two_forms_does_not_differ(resin: Material) -> None:
    law = resin.shift
    assert isinstance(law, WLF)
    vft = VFT(B=math.log(10.0) * law.C1 * law.C2, T_inf=law.T_ref - law.C2, T_ref=law.T_ref)
    other = Material(shear=resin.shear, bulk=resin.bulk, shift=vft, expansion=resin.expansion)
    assert differing(split(resin, Form()), split(other, Form()), (300.0, 400.0)) == ()


def test_a_law_without_an_answer_somewhere_differs(resin: Material) -> None:
    parts = split(resin, Form())
    below_the_pole = (280.0, 400.0)  # T_inf = 292.15 K
    assert differing(parts, parts, below_the_pole) == (SHIFT,)


def test_a_moved_reference_is_the_same_behaviour(resin: Material) -> None:
    parts = split(resin, Form())
    moved: Split = referred(parts, 373.15)
    assert differing(parts, moved, (320.0, 400.0)) == (SHIFT, TIMES)
    assert differing(parts, referred(moved, 353.15), (320.0, 400.0)) == ()


def test_parts_that_make_no_material_have_an_effect_without_bound(resin: Material) -> None:
    parts = split(resin, Form())
    broken = Split(form=Form(), shift=parts.shift, spectra=parts.spectra, bulk=parts.bulk, expansion=math.nan)
    with pytest.raises(ParameterError, match="expansion"):
        broken.material()
    bench = Bench(recorded().paths)
    assert bench.effect(bench.run(sound().material()), broken).ratio == math.inf


def test_the_bench_measures_the_largest_change_in_units_of_each_tolerance() -> None:
    bench = Bench(recorded(tolerance=0.02).paths)
    before, after = bench.run(sound().material()), bench.run(sound({"elastic.E": 3090.0}).material())
    change = bench.change(before, after)
    # Stress is proportional to the moduli; both runs make the same error of increments.
    assert change.relative == pytest.approx(0.03, rel=1e-9)
    assert change.ratio == pytest.approx(1.5, rel=1e-9)


def test_the_bench_says_where_only_one_of_two_has_a_response() -> None:
    bench = Bench(recorded().paths)
    before = bench.run(sound().material())
    refusing = bench.run(sound({"shift.measured": [70.0, 130.0], "shift.outside": "refuse"}).material())
    assert bench.change(before, refusing).ratio == math.inf
    assert bench.change(before, refusing).relative is None
    assert bench.change(refusing, refusing).ratio == 0.0
