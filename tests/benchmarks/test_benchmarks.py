"""A short run of the benchmarks: that the answers agree, that all is reported, that a wrong answer ends it. No times."""

import json

import numpy as np
import pytest

from benchmarks.__main__ import QUICK, main
from benchmarks.agreement import DisagreementError, agreement
from benchmarks.case import case
from benchmarks.engines import convolution, filtered, kernel, numpy_loop
from benchmarks.timing import Timing, interleaved, ratio


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    file = tmp_path_factory.mktemp("benchmarks") / "results.json"
    assert main(["--quick", "--json", str(file)]) == 0
    return json.loads(file.read_text())


def test_every_engine_agrees_with_the_kernel_to_its_tolerance(results):
    engines = {name: found for group in results["kernel"].values() for name, found in group["engines"].items()}
    assert {"scipy lfilter", "numpy loop", "O(N^2) sum", "scipy solve_ivp"} <= engines.keys()
    for name, found in engines.items():
        assert found["difference"] <= found["tolerance"] <= 1e-6, name
    in_c = [name for name in engines if name.startswith("C ")]
    skipped = results["kernel"]["unequal increments, changing temperature"]["skipped"]
    assert len(in_c) == 6 or skipped


def test_everything_that_was_run_is_reported(results):
    assert set(results["increments"]["seconds_an_increment"]) == {str(count) for count in QUICK.counts}
    assert set(results["terms"]["seconds_an_increment"]) == {str(count) for count in QUICK.term_counts}
    assert set(results["ensembles"]["sizes"]) == {str(size) for size in QUICK.sizes}
    assert {"import numpy", "import matlib", "check", "convert"} <= results["processes"].keys()
    assert results["memory"]["peak_KiB"] >= results["memory"]["peak_KiB_after_1e4"] > 0


def test_the_machine_is_described_without_saying_whose_it_is(results):
    assert set(results["machine"]) == {
        "processor", "processors", "system", "python", "gcc", "numpy", "scipy", "numba", "llvmlite",
    }  # fmt: skip
    assert "/" not in json.dumps(results["machine"])


def test_a_wrong_answer_ends_the_run():
    subject = case(30)
    right = kernel(subject)()
    with pytest.raises(DisagreementError, match=r"wrong is .* of the peak off, above 1e-09"):
        agreement(right, {"wrong": (lambda: right * (1.0 + 1e-8), 1e-9)})
    with pytest.raises(DisagreementError):
        agreement(right, {"nothing": (lambda: right * np.nan, 1e-9)})


@pytest.mark.parametrize("n", [1, 70, 131])
def test_the_kernel_gives_the_sum_over_the_whole_history(n):
    subject = case(n)
    expected = convolution(subject)()
    # some hundred roundings of the largest stress
    np.testing.assert_allclose(kernel(subject)(), expected, rtol=0.0, atol=1e-13 * np.abs(expected).max())
    np.testing.assert_allclose(numpy_loop(subject)(), expected, rtol=0.0, atol=1e-13 * np.abs(expected).max())


def test_a_filter_needs_increments_that_are_alike():
    with pytest.raises(ValueError, match="equal increments"):
        filtered(case(10))


def test_the_spread_of_a_ratio_is_that_of_the_rounds():
    found = ratio(Timing(rounds=np.array([2.0, 4.0, 9.0])), Timing(rounds=np.array([1.0, 1.0, 3.0])))
    assert found == {"of_least": 2.0, "median": 3.0, "quartile_1": 2.5, "quartile_3": 3.5}


def test_tasks_take_turns_after_one_run_each():
    order: list[str] = []
    timings = interleaved({"a": lambda: order.append("a"), "b": lambda: order.append("b")}, 2)
    assert order == ["a", "b", "a", "b", "a", "b"]
    assert all(timing.rounds.size == 2 and timing.least <= timing.median for timing in timings.values())
