"""Where the error comes from and why, on paths whose answer is known by construction."""

import math

import numpy as np
import pytest

from drivers.path import Cycle, Path
from drivers.report.steps import blame_sentence
from drivers.studies.blame import Blame, find_blame
from drivers.studies.routine_runner import RoutineRunner
from drivers.studies.runner import OWN, CardRunner, Rule, Runner
from drivers.studies.trial import Trials
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.shift import NoShift
from matlib.units import TEMPERATURE
from matlib.viscoelastic import LinearViscoelastic
from tests.drivers.studies.step_cases import T_REF, path_of, segment, solid

DEFAULT = Rule(shift_rule="integrated", recursion="exponential")
HELD = np.ones(6, dtype=np.bool_)


def blamed(subject: Material | Runner, path: Path, rule: Rule) -> Blame | None:
    runner = subject if isinstance(subject, Runner) else CardRunner(material=subject)
    trials = Trials(runner=runner, path=path, accuracy=1e-8)
    counts = tuple(one.increments for one in path.segments)
    return find_blame(trials, rule, counts, trials.difference(rule, counts))


def said(blame: Blame | None) -> str:
    assert blame is not None
    return blame_sentence(blame, TEMPERATURE["degC"])


def integrated(recursion: str) -> Rule:
    return Rule(shift_rule="integrated", recursion=recursion)


@pytest.mark.parametrize("rule", ["start", "end", "mean-rate"])
def test_a_quench_with_a_poor_clock_is_blamed_on_the_clock(rule):
    material = solid((3.0, 30.0), (0.3, 0.4))
    path = path_of(
        segment("uniaxial strain", durations=[0.0], label="jump"),
        segment("uniaxial strain", durations=[20.0], temperatures=[300.0], held=HELD, increments=6, label="quench"),
        segment("uniaxial strain", durations=[1e3], held=HELD, label="dwell"),
        T=370.0,
    )
    blame = blamed(material, path, Rule(shift_rule=rule, recursion="exponential"))
    assert blame is not None
    assert (blame.segment, blame.cause, blame.most) == ("quench", "clock", True)
    assert blame.defect is not None
    ends = 370.0 - 70.0 / 6.0 * np.arange(7)
    k = int(np.argmin(np.abs(0.5 * (ends[1:] + ends[:-1]) - blame.defect.temperature)))
    drop = material.shift.ln_shift(ends[k + 1]) - material.shift.ln_shift(ends[k])
    assert blame.defect.decades == pytest.approx(float(drop) / math.log(10.0), rel=1e-9)
    text = said(blame)
    assert text.startswith("Segment 'quench' makes most of the error: near ")
    assert text.endswith(
        f"a_T changes by {blame.defect.decades:.2g} decades over one increment, which shift rule {rule} does not follow."
    )


def test_a_fast_pull_in_too_few_increments_is_blamed_on_the_recursion():
    path = path_of(
        segment("uniaxial strain", durations=[10.0], increments=5, label="fast pull"),
        segment("uniaxial strain", durations=[100.0], held=HELD, increments=2000, label="dwell"),
    )
    blame = blamed(solid((0.5,), (0.7,)), path, integrated("backward-euler"))
    assert blame is not None
    assert blame.defect is not None
    assert (blame.segment, blame.cause, blame.most) == ("fast pull", "recursion", True)
    assert blame.defect.ratio == pytest.approx(4.0, rel=1e-12)  # 2 s over 0.5 s, at T_ref
    assert (blame.defect.relaxation_time, blame.defect.decades) == (0.5, 0.0)
    assert said(blame) == (
        "Segment 'fast pull' makes most of the error: near 66.85 degC one increment spans 4 relaxation times (of 0.5 s at T_ref), "
        "which backward-euler does not follow."
    )


def test_midpoint_in_long_increments_is_said_to_lose_the_viscous_stress():
    material = solid((1.0,), (0.7,))
    path = path_of(segment("uniaxial strain", durations=[100.0], increments=5))
    rule = integrated("midpoint")
    blame = blamed(material, path, rule)
    assert blame is not None
    assert blame.defect is not None
    assert blame.defect.ratio == pytest.approx(20.0, rel=1e-12)
    assert said(blame).endswith(
        "one increment spans 20 relaxation times (of 1 s at T_ref). With midpoint the gain underflows, and the viscous stress of "
        "the increment is lost."
    )
    # It is: what is left is the stress of the long-term moduli.
    run = CardRunner(material=material).run(rule, path)
    shear, rate = material.shear, 0.01 / 100.0
    elastic = (material.bulk.equilibrium + 4.0 / 3.0 * shear.equilibrium) * 0.01
    viscous = 4.0 / 3.0 * float(shear.moduli[0]) * rate * 1.0
    assert abs(run.stress[-1, 0] - elastic) < 1e-2 * viscous  # exp(-10) of 20 s worth of rate


def test_trapezoidal_in_long_increments_is_said_to_ring():
    material = solid((1e-3,), (0.7,))
    path = path_of(
        segment("uniaxial strain", durations=[0.0], label="jump"),
        segment("uniaxial strain", durations=[10.0], held=HELD, increments=10, label="dwell"),
    )
    rule = integrated("trapezoidal")
    blame = blamed(material, path, rule)
    assert blame is not None
    assert blame.defect is not None
    assert (blame.segment, blame.cause) == ("dwell", "recursion")
    assert blame.defect.ratio == pytest.approx(1000.0, rel=1e-12)
    assert said(blame).endswith(
        "With trapezoidal the decay tends to -1, and the stress rings from increment to increment."
    )
    # It does: about the long-term stress, from one side to the other.
    run = CardRunner(material=material).run(rule, path).stress[1:, 0]
    about = run - (material.bulk.equilibrium + 4.0 / 3.0 * material.shear.equilibrium) * 0.01
    assert np.all(about[1:] * about[:-1] < 0.0)


@pytest.mark.parametrize("recursion", ["midpoint", "trapezoidal"])
def test_a_limit_that_is_not_run_into_is_not_spoken_of(recursion):
    path = path_of(segment("uniaxial strain", durations=[10.0], increments=10))
    assert said(blamed(solid((1.0,), (0.7,)), path, integrated(recursion))).endswith(
        f"which {recursion} does not follow."
    )


def test_an_exact_clock_with_the_exponential_recursion_errs_where_the_rate_changes_within_an_increment():
    path = path_of(
        segment("uniaxial strain", durations=[10.0], increments=5, label="steady"),
        segment("uniaxial strain", durations=[60.0], temperatures=[300.0], value=0.0, increments=5, label="cool"),
    )
    blame = blamed(solid((3.0, 30.0), (0.3, 0.4)), path, DEFAULT)
    assert blame is not None
    assert blame.defect is not None
    assert (blame.segment, blame.cause) == ("cool", "recursion")
    assert blame.defect.decades > 0.3
    assert said(blame).endswith(
        f"while a_T changes by {blame.defect.decades:.2g} decades, which exponential takes as steady."
    )


def test_free_sides_that_contract_on_a_curve_are_told_where_nothing_else_errs():
    path = path_of(segment("uniaxial stress", durations=[10.0], increments=5), mode="uniaxial stress")
    blame = blamed(solid((2.0,), (0.7,), NoShift()), path, DEFAULT)
    assert blame is not None
    assert blame.cause == "free strain"
    assert said(blame).endswith("its free strains bend within an increment, and the update takes them as straight.")


def test_bulk_relaxation_is_looked_at_as_well():
    bulk = PronySeries.from_fractions(3e9, [0.6], [0.25])
    material = Material(shear=PronySeries.elastic(1e9), bulk=bulk, shift=NoShift())
    path = path_of(segment("hydrostatic", durations=[10.0], increments=5), mode="hydrostatic")
    blame = blamed(material, path, integrated("backward-euler"))
    assert blame is not None
    assert blame.defect is not None
    assert (blame.defect.relaxation_time, blame.defect.ratio) == (0.25, pytest.approx(8.0, rel=1e-12))


def test_no_segment_is_said_to_make_most_where_several_make_as_much():
    hot = {"durations": [20.0], "increments": 4}
    path = path_of(*(segment("uniaxial strain", value=v, label=f"pull {v}", **hot) for v in (0.01, 0.02, 0.03, 0.04)))
    blame = blamed(solid((5e3,), (0.7,)), path, integrated("backward-euler"))  # nothing is forgotten: errors add up
    assert blame is not None
    assert not blame.most
    assert "makes the largest part of the error" in said(blame)


def test_a_segment_of_a_cycle_is_blamed_for_all_its_turns():
    turns = Cycle(
        repeat=4,
        segments=(
            segment("uniaxial strain", durations=[60.0], temperatures=[345.0], increments=200, label="heat"),
            segment(
                "uniaxial strain", durations=[5.0], temperatures=[T_REF - 30.0], value=0.0, increments=8, label="cool"
            ),
        ),
    )
    blame = blamed(solid((3.0, 30.0), (0.3, 0.4)), path_of(turns), Rule(shift_rule="end", recursion="exponential"))
    assert blame is not None
    assert (blame.segment, blame.cause) == ("cool", "clock")


def test_nothing_is_blamed_where_there_is_no_error():
    path = path_of(
        segment("uniaxial strain", durations=[0.0]),
        segment("uniaxial strain", durations=[100.0], held=HELD, increments=3),
    )
    assert blamed(solid((3.0, 30.0), (0.3, 0.4)), path, DEFAULT) is None


@pytest.mark.parametrize("known", [True, False])
def test_a_routine_of_its_own_rule_is_told_the_segment_and_the_size_of_its_increments(known):
    material = solid((0.5,), (0.7,))
    path = path_of(
        segment("uniaxial strain", durations=[10.0], increments=5, label="fast pull"),
        segment("uniaxial strain", durations=[10.0], held=HELD, increments=200, label="dwell"),
    )
    runner = RoutineRunner(
        routine=LinearViscoelastic(material=material, recursion=RECURSIONS["backward-euler"]),
        claimed_order=1.0,
        material=material if known else None,
        own_accuracy=1e-3,
    )
    blame = blamed(runner, path, OWN)
    assert blame is not None
    assert (blame.segment, blame.cause) == ("fast pull", "its own")
    text = "Segment 'fast pull' makes most of the error"
    if known:
        text += ": near 66.85 degC one increment spans 4 relaxation times (of 0.5 s at T_ref)"
    assert said(blame) == f"{text}."
