from __future__ import annotations

import itertools
from pathlib import Path

import numpy as np
import pytest

from drivers.baseline_file import Baseline
from drivers.report.baseline import Verified, verified_data, verified_tables
from drivers.spread_file import Spread, read_spread
from drivers.studies.baseline import verify
from drivers.studies.bench import Bench
from drivers.studies.spread import Scatter, _draws, scatter
from matlib.errors import FileError, ParameterError
from tests.baselines import recorded, shown, sound

STIFFNESS = '[spread]\n"elastic.E" = 30.0\n'


@pytest.fixture(scope="module")
def baseline() -> Baseline:
    return recorded(names=("relaxation, 60 degC",))


def spread_of(folder: Path, text: str) -> Spread:
    file = folder / "lot.spread.toml"
    file.write_text(text, encoding="utf-8")
    return read_spread(file, sound())


def found(folder: Path, text: str, baseline: Baseline, E: float = 3000.0, samples: int = 200, seed: int = 0) -> Scatter:
    verification = verify(sound({"elastic.E": E}).material(), baseline)
    return scatter(sound(), spread_of(folder, text), verification, samples=samples, seed=seed)


def faults(folder: Path, text: str) -> str:
    with pytest.raises(FileError) as error:
        spread_of(folder, text)
    return str(error.value)


def test_the_band_of_one_scattering_modulus_is_that_of_a_normal_variable(tmp_path: Path, baseline: Baseline) -> None:
    path = found(tmp_path, STIFFNESS, baseline, samples=400).paths[0]
    # Stress is proportional to E, so the differences are |normal| of deviation 1 %: half of them within 0.6745, 95 % within
    # 1.960 deviations. The quantiles of 400 samples scatter by 5 % and 6 % of that (one deviation); three are allowed.
    assert path.band == pytest.approx(0.0196, rel=0.18)
    assert path.middle == pytest.approx(0.006745, rel=0.15)


def test_the_band_of_the_stress_lies_about_the_recorded_response(tmp_path: Path, baseline: Baseline) -> None:
    path = found(tmp_path, STIFFNESS, baseline, samples=400).paths[0]
    stress = path.centre.stress_components[1:, 0]
    np.testing.assert_allclose(path.low[1:, 0] / stress, 1.0 - 0.0196, atol=0.004)
    np.testing.assert_allclose(path.high[1:, 0] / stress, 1.0 + 0.0196, atol=0.004)


def test_a_change_beyond_the_scatter_exceeds_it_and_one_within_does_not(tmp_path: Path, baseline: Baseline) -> None:
    assert found(tmp_path, STIFFNESS, baseline, E=3120.0).exceeds
    assert not found(tmp_path, STIFFNESS, baseline, E=3015.0).exceeds


def test_the_same_seed_gives_the_same_band_and_another_another(tmp_path: Path, baseline: Baseline) -> None:
    bands = [found(tmp_path, STIFFNESS, baseline, samples=20, seed=seed).paths[0].band for seed in (3, 3, 4)]
    assert bands[0] == bands[1] != bands[2]


def test_draws_have_the_deviations_and_correlations_of_the_file(tmp_path: Path) -> None:
    text = (
        '[spread]\n"shift.C1" = 0.3\n"shift.C2" = 4.0\n"prony.shear[3].fraction" = 0.01\n'
        '[[correlation]]\nbetween = ["shift.C1", "shift.C2"]\nvalue = 0.95\n'
    )
    spread = spread_of(tmp_path, text)
    assert spread.keys == ("shift.C1", "shift.C2", "prony.shear[3].fraction")
    drawn = np.array(list(itertools.islice(_draws(spread, 1), 20_000)))
    # Sample moments of 20 000 draws: means and correlations to 0.007, deviations to 0.005; three times that.
    standard = (drawn - [14.2, 161.0, 0.2]) / [0.3, 4.0, 0.01]
    np.testing.assert_allclose(standard.mean(axis=0), 0.0, atol=0.021)
    np.testing.assert_allclose(standard.std(axis=0), 1.0, rtol=0.015)
    correlation = np.corrcoef(standard.T)
    assert correlation[0, 1] == pytest.approx(0.95, abs=0.003)
    assert correlation[0, 2] == pytest.approx(0.0, abs=0.021)


def test_fully_correlated_constants_move_as_one(tmp_path: Path) -> None:
    text = '[spread]\n"shift.C1" = 0.3\n"shift.C2" = 4.0\n'
    text += '[[correlation]]\nbetween = ["shift.C1", "shift.C2"]\nvalue = -1.0\n'
    drawn = np.array(list(itertools.islice(_draws(spread_of(tmp_path, text), 1), 50)))
    # Opposite to rounding, which the square root of a zero eigenvalue magnifies.
    np.testing.assert_allclose((drawn[:, 0] - 14.2) / 0.3, -(drawn[:, 1] - 161.0) / 4.0, atol=1e-6)


def test_samples_that_are_no_material_are_drawn_again_counted_and_told(tmp_path: Path, baseline: Baseline) -> None:
    text = '[spread]\n"prony.shear[1].fraction" = 0.1\n'  # a mean of 0.1: 16 % of the draws are negative
    result = found(tmp_path, text, baseline, samples=100)
    assert 5 <= result.redrawn <= 40  # 19 are expected, give or take 5 (one deviation)
    verification = verify(sound().material(), baseline)
    verified = Verified(card=sound(), baseline=baseline, verification=verification, moved=(), scatter=result)
    told = shown(verified_tables(verified))
    assert f"{result.redrawn} draws were no material, or had no answer, and were drawn again" in told
    data = verified_data(verified)["scatter"]
    assert (data["samples"], data["redrawn"], data["level"], data["exceeds"]) == (100, result.redrawn, 0.95, False)


def test_samples_side_by_side_are_samples_one_by_one(
    tmp_path: Path, baseline: Baseline, monkeypatch: pytest.MonkeyPatch
) -> None:
    text = '[spread]\n"shift.C1" = 0.3\n"prony.shear[3].fraction" = 0.1\n'  # some fractions fall below 0
    counts: list[int] = []
    verification = verify(sound().material(), baseline)
    spread = spread_of(tmp_path, text)
    many = scatter(sound(), spread, verification, samples=30, progress=counts.append)
    assert sum(counts) == 30
    monkeypatch.setattr(Bench, "run_many", lambda *_: None)
    single = scatter(sound(), spread, verification, samples=30, progress=counts.append)
    assert sum(counts) == 60
    assert many.redrawn == single.redrawn > 0
    for one, other in zip(many.paths, single.paths, strict=True):
        assert one.band == pytest.approx(other.band, rel=1e-9)  # the same arithmetic, summed in another order
        np.testing.assert_allclose(one.low, other.low, rtol=0.0, atol=1e-9 * float(np.abs(other.low).max()))


def test_a_spread_that_makes_hardly_any_material_is_refused(tmp_path: Path, baseline: Baseline) -> None:
    text = '[spread]\n"elastic.nu" = 1000.0\n'
    with pytest.raises(ParameterError, match="mostly makes materials"):
        found(tmp_path, text, baseline, samples=20)


def test_too_few_samples_for_a_band_are_refused(tmp_path: Path, baseline: Baseline) -> None:
    with pytest.raises(ParameterError, match=r"`samples` must be >= 20 \(got 5\)"):
        found(tmp_path, STIFFNESS, baseline, samples=5)


def test_a_card_without_a_response_exceeds_any_scatter(tmp_path: Path, baseline: Baseline) -> None:
    refusing = sound({"shift.measured": [70.0, 130.0], "shift.outside": "refuse"})
    verification = verify(refusing.material(), baseline)
    assert scatter(sound(), spread_of(tmp_path, STIFFNESS), verification, samples=20).exceeds


def test_a_key_that_the_card_does_not_have_is_named_with_the_likely_one(tmp_path: Path) -> None:
    assert "write 'shift.C1'" in faults(tmp_path, '[spread]\n"shift.c1" = 0.3\n')
    text = '[spread]\n"prony.shear[9].fraction" = 0.3\n"shift.law" = 1.0\n'
    message = faults(tmp_path, text)
    assert "prony.shear[9].fraction" in message
    assert "'shift.law'" in message  # a text does not scatter


def test_the_modulus_of_a_term_is_called_its_fraction(tmp_path: Path) -> None:
    assert "write 'prony.shear[2].fraction'" in faults(tmp_path, '[spread]\n"prony.shear[2].modulus" = 1.0\n')


def test_a_correlation_with_a_key_that_does_not_scatter_is_refused(tmp_path: Path) -> None:
    text = STIFFNESS + '[[correlation]]\nbetween = ["elastic.E", "shift.C1"]\nvalue = 0.5\n'
    assert "correlation[1].between: found 'shift.C1', expected a key of [spread]" in faults(tmp_path, text)
    text = STIFFNESS + '[[correlation]]\nbetween = ["elastic.E", "elastic.E"]\nvalue = 0.5\n'
    assert "one key twice" in faults(tmp_path, text)


def test_correlations_that_contradict_each_other_are_refused(tmp_path: Path) -> None:
    keys = ["elastic.E", "shift.C1", "shift.C2"]
    text = "[spread]\n" + "".join(f'"{key}" = 1.0\n' for key in keys)
    for (a, b), value in zip(itertools.combinations(keys, 2), (0.9, 0.9, -0.9), strict=True):
        text += f'[[correlation]]\nbetween = ["{a}", "{b}"]\nvalue = {value}\n'
    assert "contradict each other" in faults(tmp_path, text)


@pytest.mark.parametrize(
    "text",
    [
        '[spread]\n"elastic.E" = -1.0\n',
        '[spread]\n"elastic.E" = "a lot"\n',
        "[spread]\n",
        "",
        STIFFNESS + '[[correlation]]\nbetween = ["elastic.E", "elastic.E"]\nvalue = 1.5\n',
    ],
)
def test_a_spread_file_that_is_none_is_refused(tmp_path: Path, text: str) -> None:
    assert "lot.spread.toml" in faults(tmp_path, text)
