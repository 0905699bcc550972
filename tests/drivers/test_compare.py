"""The comparison of two materials: differences that are known in closed form, verdicts on either side of a tolerance."""

import dataclasses
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.battery import Window, battery
from drivers.path import MODES, Cycle, Path, Segment
from drivers.studies.compare import LARGEST_RUN, Comparison, compare
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import VFT, WLF, MeasuredRange, NoShift, Table
from matlib.shift.conversion import convert_law
from tests.strategies import COLD, HOT, materials, paths

LN10 = math.log(10.0)
WINDOW = Window(temperature=(333.15, 393.15), time=(1.0, 1e5), source="test")


def segment(
    mode: str, *, by: str = "strain", value: float = 0.01, duration: float = 10.0, T: float | None = None
) -> Segment:
    """One segment of a named mode."""
    controlled, targets = np.zeros(6, dtype=bool), np.zeros((1, 6))
    controlled[list(MODES[mode].free)] = True
    controlled[list(MODES[mode].driven)] = by == "stress"
    targets[0, list(MODES[mode].driven)] = value
    return Segment(
        label="pull",
        durations=np.array([duration]),
        temperatures=None if T is None else np.array([T]),
        targets=targets,
        stress_controlled=controlled,
        held=np.zeros(6, dtype=bool),
    )


def path_of(*parts: Segment | Cycle, mode: str = "uniaxial strain", T: float = 353.15) -> Path:
    return Path(name="p", mode=MODES[mode], start_temperature=T, parts=parts)


def compared(
    a: Material, b: Material, *paths: Path, tolerance: float = 0.01, T: tuple[float, float] = (343.15, 373.15)
) -> Comparison:
    return compare(a, b, paths, tolerance=tolerance, temperatures=T)


def scaled(material: Material, factor: float) -> Material:
    """Every modulus times a factor."""
    return dataclasses.replace(material, shear=material.shear.scaled(factor), bulk=material.bulk.scaled(factor))


def test_a_card_is_identical_to_itself_on_the_whole_battery(resin):
    result = compared(resin, resin, *battery(resin, WINDOW), T=WINDOW.temperature)
    assert result.same == "identical"
    assert result.holds
    assert result.shift.decades == 0.0
    assert all(path.relative == 0.0 and path.identical for path in result.paths)


def test_an_exact_conversion_is_identical_to_rounding_on_the_whole_battery(resin):
    law = resin.shift
    assert isinstance(law, WLF)
    conversion = convert_law(law, "vft", T_ref=298.15)
    assert isinstance(conversion.law, VFT)
    moved = dataclasses.replace(
        resin,
        shift=conversion.law,
        shear=PronySeries(
            equilibrium=resin.shear.equilibrium,
            moduli=resin.shear.moduli,
            times=resin.shear.times * conversion.time_factor,
        ),
        bulk=PronySeries(
            equilibrium=resin.bulk.equilibrium,
            moduli=resin.bulk.moduli,
            times=resin.bulk.times * conversion.time_factor,
        ),
    )
    result = compared(resin, moved, *battery(resin, WINDOW), T=WINDOW.temperature, tolerance=1e-6)
    assert result.same == "identical"
    assert result.shift.decades == pytest.approx(0.0, abs=1e-12)
    assert all(0.0 < path.rounding < 1e-8 for path in result.paths)


@pytest.mark.parametrize("share", [1e-2, 1e-5])
def test_moduli_off_by_a_share_are_found_and_judged_on_either_side_of_the_tolerance(resin, share):
    pull = path_of(segment("uniaxial strain"))
    for tolerance, same in ((share * 1.001, "within tolerance"), (share * 0.999, "different")):
        result = compared(resin, scaled(resin, 1.0 + share), pull, tolerance=tolerance)
        (path,) = result.paths
        assert result.same == same
        assert path.holds is result.holds is (same != "different")
        assert path.relative == pytest.approx(share, rel=1e-3)  # linear: every stress is off by it
        assert path.bound < 1e-3 * share
        assert path.difference is not None
        assert (path.difference.quantity, path.difference.component) == ("stress", "s11")
        assert not path.identical


def test_a_stress_driven_path_is_judged_on_its_strain(resin):
    creep = path_of(segment("uniaxial stress", by="stress", value=1e6), mode="uniaxial stress")
    (path,) = compared(resin, scaled(resin, 1.25), creep).paths
    assert path.difference is not None
    assert (path.difference.quantity, path.difference.component) == ("strain", "e11")
    assert path.relative == pytest.approx(0.2, rel=1e-6)  # 1 - 1/1.25


def test_the_difference_is_placed_where_it_is_largest(resin):
    up, down = segment("uniaxial strain"), segment("uniaxial strain", value=0.0)
    (path,) = compared(resin, scaled(resin, 1.1), path_of(up, down, segment("uniaxial strain", value=0.002))).paths
    assert path.difference is not None
    assert (path.difference.at.segment, path.difference.at.time, path.difference.at.temperature) == (
        "pull",
        10.0,
        353.15,
    )


def test_shift_laws_differ_most_at_the_far_end_by_what_their_constants_say(resin):
    other = dataclasses.replace(resin, shift=WLF(C1=14.2 * 1.01, C2=61.0, T_ref=353.15))
    result = compared(resin, other, path_of(segment("uniaxial strain")), T=(333.15, 363.15))
    assert result.shift.decades == pytest.approx(0.01 * 14.2 * 20.0 / 41.0, rel=1e-9)  # 20 K below, 41 K above the pole
    assert result.shift.temperature == 333.15


def test_shift_laws_about_other_references_are_held_against_each_other_at_one_temperature(resin):
    conversion = convert_law(resin.shift, "wlf", T_ref=390.0)
    other = dataclasses.replace(
        resin, shift=conversion.law
    )  # relaxation times left behind: the laws agree, the cards not
    result = compared(resin, other, path_of(segment("uniaxial strain")))
    assert result.shift.decades == pytest.approx(0.0, abs=1e-12)
    assert result.same == "different"


def test_a_card_without_an_answer_is_different_and_says_which_card_and_why(resin):
    refusing = dataclasses.replace(resin, shift=MeasuredRange(law=resin.shift, low=340.0, high=360.0, outside="refuse"))
    warm = path_of(segment("uniaxial strain", T=380.0))
    result = compared(resin, refusing, warm, path_of(segment("uniaxial strain")), T=(343.15, 383.15))
    assert result.same == "different"
    assert result.worst is result.paths[0]
    assert result.paths[0].relative is None
    assert result.paths[0].reason.startswith("second card: shift law wlf: no shift factor at 37")
    assert (result.paths[0].first is None, result.paths[0].second is None) == (False, True)
    assert result.paths[1].identical
    assert result.shift.decades is None
    assert "no shift factor" in result.shift.reason


def test_the_worst_path_comes_first_to_mind(resin):
    other = dataclasses.replace(resin, bulk=resin.bulk.scaled(1.1))
    modes = ("simple shear", "hydrostatic")
    result = compared(resin, other, *(path_of(segment(mode), mode=mode) for mode in modes))
    assert result.worst.path.mode.name == "hydrostatic"
    assert result.paths[0].relative == 0.0
    assert result.worst.relative == pytest.approx(0.1, rel=1e-6)


def test_two_points_that_bear_nothing_are_identical(resin):
    rest = path_of(segment("uniaxial strain", value=0.0))
    assert compared(resin, scaled(resin, 2.0), rest).same == "identical"


def test_a_range_of_temperature_as_small_as_a_rounding_is_no_crash(resin):
    almost = path_of(segment("uniaxial strain", T=np.nextafter(353.15, 400.0)))
    result = compared(resin, scaled(resin, 1.1), almost, T=almost.temperature_range)
    assert result.paths[0].relative == pytest.approx(0.1, rel=1e-6)
    assert compared(resin, resin, almost, T=almost.temperature_range).same == "identical"


def test_a_law_too_steep_for_doubles_is_not_excused_by_rounding(resin):
    steep = [
        dataclasses.replace(resin, shift=Table(T=[333.15, 353.15, 403.15], log10_a=[2.0, 0.0, top], T_ref=353.15))
        for top in (1e18, -4.0)
    ]
    heated = path_of(segment("uniaxial strain", T=373.15), segment("uniaxial strain", value=0.0))
    assert compared(steep[1], steep[0], heated).same == "different"
    assert compared(steep[0], steep[0], heated).same == "identical"


def test_free_expansion_bears_nothing_but_rounding_and_is_identical_in_another_form(resin):
    law = resin.shift
    assert isinstance(law, WLF)
    offset = dataclasses.replace(resin, shift=VFT(B=LN10 * law.C1 * law.C2, T_inf=law.T_ref - law.C2, T_ref=law.T_ref))
    free = path_of(segment("hydrostatic", by="stress", value=0.0, T=390.0), mode="hydrostatic")
    assert compared(resin, offset, free).same == "identical"


def test_the_increments_of_the_path_have_no_say(resin):
    other = dataclasses.replace(resin, shift=WLF(C1=14.0, C2=61.0, T_ref=353.15))
    pull = path_of(segment("uniaxial stress", T=363.15), mode="uniaxial stress")
    one, many = (compared(resin, other, pull.with_increments(n)).paths[0].relative for n in (1, 1000))
    assert one == many


@pytest.mark.parametrize("tolerance", [-1e-3, math.nan, math.inf])
def test_a_tolerance_that_is_none_is_refused(resin, tolerance):
    with pytest.raises(ParameterError, match="`tolerance` must be finite and >= 0"):
        compared(resin, resin, path_of(segment("uniaxial strain")), tolerance=tolerance)


def test_without_paths_there_is_nothing_to_compare(resin):
    with pytest.raises(ParameterError, match="`paths` must be at least one path"):
        compared(resin, resin)


def test_a_run_that_would_never_end_is_refused_at_once(resin):
    endless = path_of(Cycle(repeat=10**9, segments=(segment("uniaxial strain"),)))
    with pytest.raises(ParameterError, match=f"`path 'p'` must be at most {LARGEST_RUN} rows long"):
        compared(resin, resin, endless)


def test_progress_counts_paths(resin):
    done: list[int] = []
    pulls = [path_of(segment("uniaxial strain"))] * 3
    compare(resin, resin, pulls, tolerance=0.01, temperatures=(343.15, 373.15), progress=done.append)
    assert done == [1, 1, 1]


@given(material=materials(max_terms=3), path=paths(max_segments=2), data=st.data())
@settings(max_examples=30)
def test_equal_materials_in_another_form_are_never_called_different(material, path, data):
    """The same series with its terms in another order and one of them split in two."""
    series, k = material.shear, data.draw(st.integers(0, material.shear.times.size - 1))
    share = data.draw(st.floats(0.1, 0.9))
    moduli = np.append(series.moduli, series.moduli[k] * (1.0 - share))
    moduli[k] *= share
    split = PronySeries(equilibrium=series.equilibrium, moduli=moduli, times=np.append(series.times, series.times[k]))
    result = compared(material, dataclasses.replace(material, shear=split), path, tolerance=1e-9, T=(COLD, HOT))
    assert result.same == "identical"


def test_elastic_materials_are_compared_too():
    hard = Material(shear=PronySeries.elastic(1e9), bulk=PronySeries.elastic(2e9), shift=NoShift())
    result = compared(hard, scaled(hard, 1.005), path_of(segment("uniaxial stress"), mode="uniaxial stress"))
    assert result.same == "within tolerance"
    assert result.paths[0].relative == pytest.approx(0.005, rel=1e-9)
