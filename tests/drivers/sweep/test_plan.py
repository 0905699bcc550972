"""What is a new case and what is not; what a sweep file must not say."""

import dataclasses
import os
import pickle
import time
from pathlib import Path

import pytest

from drivers.reference import solve
from drivers.sweep import run_case
from drivers.sweep.digest import digest
from drivers.sweep.local import problems
from drivers.sweep.plan import MOST_CASES, plan_of
from drivers.sweep.run_case import CaseRunner
from drivers.sweep.sweep_file import read_sweep
from matlib.errors import FileError
from tests.drivers.files import CARD, PATH
from tests.drivers.sweep.conftest import sweep_text


def keys(folder) -> dict[tuple, str]:
    """Key of each case by what it is."""
    cases = plan_of(read_sweep(folder.file)).cases()
    return {(case.card, case.path, case.rule.shift_rule, case.sample): case.key for case in cases}


def changed(before, after) -> set[str]:
    """Cards whose cases are others now, all of them."""
    moved = {name[0] for name in before if before[name] != after[name]}
    assert all(before[name] != after[name] for name in before if name[0] in moved)
    return moved


def test_every_case_has_a_key_of_its_own(folder):
    place = folder(samples=3)
    found = keys(place)
    assert len(found) == len(set(found.values())) == 2 * 2 * 2 * 4 == len(plan_of(read_sweep(place.file)))


def test_two_cards_that_say_the_same_are_two_cards(folder):
    place = folder()
    (place.place / "cards" / "c.card.toml").write_text(CARD)
    found = keys(place)
    assert len(set(found.values())) == 3 * 2 * 2


def test_a_comment_and_the_place_where_it_is_run_change_nothing(folder, monkeypatch):
    place = folder(samples=1)
    before = keys(place)
    card = place.place / "cards" / "a.card.toml"
    card.write_text("# looked at\n" + card.read_text())
    monkeypatch.chdir(place.place)
    place.file = place.file.relative_to(os.getcwd())
    assert keys(place) == before


def test_a_card_that_changes_has_new_cases_and_no_other_card_has(folder):
    place = folder(samples=1)
    before = keys(place)
    card = place.place / "cards" / "a.card.toml"
    card.write_text(CARD.replace("C1 = 14.2", "C1 = 14.3"))
    assert changed(before, keys(place)) == {"cards/a.card.toml"}


def test_a_record_that_changes_makes_its_path_new(folder):
    place = folder()
    header = "time [s],temperature [degC],strain [-]\n"
    record = place.place / "oven.csv"
    (place.place / "p.path.toml").write_text(
        'name = "oven"\nmode = "uniaxial stress"\nrecord = "oven.csv"\n[units]\ntime = "s"\ntemperature = "degC"\n'
    )
    record.write_text(header + "0,80,0\n10,80,0.01\n")
    before = keys(place)
    record.write_text(header + "0,80,0\n10,80,0.011\n")
    after = keys(place)
    assert {name[1] for name in before if before[name] != after[name]} == {"p.path.toml"}


@pytest.mark.parametrize(("old", "new"), [("seed = 7", "seed = 8"), ('"shift.C1" = 0.2', '"shift.C1" = 0.21')])
def test_other_samples_are_new_and_the_card_itself_is_not(folder, old, new):
    place = folder(samples=2)
    before = keys(place)
    place.file.write_text(place.file.read_text().replace(old, new))
    after = keys(place)
    assert {name[3] for name in before if before[name] != after[name]} == {1, 2}


def test_more_samples_keep_those_that_are_there(folder):
    place = folder(samples=2)
    before = keys(place)
    place.file.write_text(place.file.read_text().replace("count = 2", "count = 3"))
    assert before.items() < keys(place).items()


def test_cases_that_share_material_and_path_follow_each_other_and_share_the_reference(folder, monkeypatch):
    plan = plan_of(read_sweep(folder(samples=1).file))
    cases, solved = list(plan.cases()), []
    monkeypatch.setattr(run_case, "solve", lambda *given, **named: solved.append(1) or solve(*given, **named))
    runner = CaseRunner(plan)
    outcomes = [runner.run(case) for case in cases]
    assert [outcome.error for outcome in outcomes] == [None] * 16
    assert len(solved) == len(list(problems(cases))) == 8
    alone = [CaseRunner(plan).run(case) for case in cases]
    assert [dataclasses.replace(a, seconds=0.0) for a in alone] == [
        dataclasses.replace(b, seconds=0.0) for b in outcomes
    ]


def test_a_part_of_a_plan_survives_the_way_to_a_worker_and_gives_the_same(folder):
    plan = plan_of(read_sweep(folder(samples=1).file))
    cases = list(plan.cases())[-4:]
    part = pickle.loads(pickle.dumps(plan.part(cases)))
    assert list(part.entries) == ["cards/b.card.toml"]
    assert len(pickle.dumps(part)) < len(pickle.dumps(plan))
    for case in cases:
        here, there = CaseRunner(plan).run(case), CaseRunner(part).run(case)
        assert dataclasses.replace(here, seconds=0.0) == dataclasses.replace(there, seconds=0.0)


def test_a_digest_sees_type_shape_and_order():
    values = [1, 1.0, "1", True, None, [1], [[1]], [1, 1], {"1": 1}, {"1": 1.0}, [None]]
    assert len({digest(value) for value in values}) == len(values)
    with pytest.raises(TypeError, match="no digest of a object"):
        digest(object())


def test_hundred_thousand_cases_are_planned_within_seconds(folder):
    place = folder(samples=12_499)
    plan = plan_of(read_sweep(place.file))
    started = time.process_time()
    count = len({case.key for case in plan.cases()})
    assert count == len(plan) == 100_000
    assert time.process_time() - started < 10.0  # half a second on a desk machine


def test_more_cases_than_memory_holds_are_refused(folder):
    place = folder(samples=1_000_000)
    with pytest.raises(FileError, match=f"cases: found 8000008, expected at most {MOST_CASES} cases"):
        plan_of(read_sweep(place.file))


def test_all_faults_of_a_sweep_file_are_told_at_once(folder, sweep):
    place = folder()
    text = sweep_text(samples=1, more='[output]\ndatabase = "nowhere/x.sqlite"\n')
    text = text.replace('"*.path.toml"', '"*.path.toml", "none/*"').replace('"cards/*', '"none.toml", "/cards/*')
    text = text.replace('shift_rule = "middle", recursion = "midpoint"', "")
    place.file.write_text(text)
    status, out, err = sweep(place)
    assert (status, out, len(err.splitlines())) == (2, "", 5)
    for line, key in zip(
        err.splitlines(),
        ["cases.cards[1]", "cases.cards[2]", "cases.paths[2]", "cases.rules[2]", "output.database"],
        strict=True,
    ):
        assert line.startswith(f"{place.file}: {key}: found ")


def test_all_faults_of_cards_and_paths_are_told_at_once(folder, sweep):
    place = folder(samples=1, deviation='"shift.C3" = 0.1')
    (place.place / "cards" / "c.card.toml").write_text(CARD.replace("nu = 0.36", "nu = 0.6"))
    (place.place / "p.path.toml").write_text(PATH.replace("duration = 0.5", "duration = -0.5"))
    status, out, err = sweep(place)
    assert (status, out) == (2, "")
    lines = err.splitlines()
    assert any('s.sweep.toml: samples.deviation."shift.C3": found none in cards/a.card.toml' in line for line in lines)
    assert any("write 'shift.C" in line for line in lines)
    assert any("c.card.toml: " in line for line in lines)
    assert any("p.path.toml: " in line for line in lines)


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ("tolerance = 0.05", "tolerance = 0.0", "cases.tolerance"),
        ("seed = 7", "seed = -1", "samples.seed"),
        ("count = 1", "count = 0", "samples.count"),
        ('"shift.C1" = 0.2', '"shift.C1" = nan', "samples.deviation"),
        ('"shift.C1" = 0.2', "", "samples.deviation"),
        ('"integrated"', '"best"', "cases.rules[1].shift_rule"),
        ('name = "library [x]"', "", "name"),
        ("[cases]", "[case]", "case"),
    ],
)
def test_a_bad_value_is_refused_with_its_key(folder, sweep, old, new, key):
    place = folder(samples=1)
    place.file.write_text(place.file.read_text().replace(old, new, 1))
    status, out, err = sweep(place)
    assert (status, out) == (2, "")
    assert any(line.startswith(f"{place.file}: {key}") for line in err.splitlines()), err
    assert not place.database.exists()


def test_the_sweep_file_of_the_readme_is_complete(folder):
    text = (Path(__file__).parents[3] / "README.md").read_text(encoding="utf-8")
    (block,) = (block for block in text.split("```toml\n")[1:] if "[samples.deviation]" in block)
    place = folder()
    (place.place / "paths").mkdir()
    (place.place / "p.path.toml").rename(place.place / "paths" / "p.path.toml")
    place.file.write_text(block.partition("```")[0])
    plan = plan_of(read_sweep(place.file))
    assert len(plan) == 2 * 1 * 2 * 201
    last = list(plan.cases())[-1]
    assert CaseRunner(plan).run(last).error is None
