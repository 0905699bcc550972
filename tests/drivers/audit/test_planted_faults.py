"""Every fault planted in the example routine is found by a check whose sentence fits; correct routines pass."""

import numpy as np
import pytest

from drivers.foreign.failure import RoutineFailureError
from drivers.foreign.foreign import ForeignRoutine
from drivers.studies.audit import CheckResult, audit, subject_of
from matlib.card_conversion import card_text
from tests.drivers.audit.faults import FAULTS

CARDS = 3  # random cards for correct routines; 20 were run by hand


def audited(file, *, quick=True):
    def failed(error):
        if not isinstance(error, RoutineFailureError):
            return None
        return CheckResult(id="", holds=False, measured=None, limit=None, message=str(error))

    with ForeignRoutine(file) as routine:
        described = routine.described
        return audit(subject_of(routine, described.card, order=routine.order, quick=quick), failed=failed)


def wrong(result):
    return {check.id: check.message for check in result.checks if not check.holds}


def test_there_are_at_least_twenty_five_faults():
    assert len(FAULTS) >= 25
    assert len({fault.name for fault in FAULTS}) == len(FAULTS)


@pytest.mark.parametrize("fault", FAULTS, ids=[fault.name for fault in FAULTS])
def test_a_planted_fault_is_found_by_a_check_whose_sentence_fits(fault, built):
    found = wrong(audited(built(fault.changes)))
    hits = [name for name in fault.checks if name in found]
    assert hits, found
    assert any(fault.says in found[name] for name in hits), found


def random_card(folder, seed):
    """An invented card for the example routine: WLF, shear and bulk terms."""
    rng = np.random.default_rng(seed)
    n, m = int(rng.integers(1, 9)), int(rng.integers(0, 4))
    T_ref, C2 = float(rng.uniform(290.0, 390.0)), float(rng.uniform(80.0, 150.0))
    shares = rng.dirichlet(np.ones(n)) * rng.uniform(0.3, 0.97)
    prony = {
        "relative_to": "instantaneous",
        "shear": [[float(10.0 ** rng.uniform(-5.0, 6.0)), float(g)] for g in shares],
    }
    if m:
        prony["bulk"] = [[float(10.0 ** rng.uniform(-4.0, 5.0)), float(g)] for g in rng.dirichlet(np.ones(m)) * 0.3]
    tables = {
        "name": f"random {seed}",
        "units": {"stress": "MPa", "time": "s", "temperature": "K"},
        "elastic": {
            "E": float(rng.uniform(5.0, 5000.0)),
            "nu": float(rng.uniform(0.2, 0.45)),
            "state": "instantaneous",
        },
        "prony": prony,
        "shift": {"law": "wlf", "T_ref": T_ref, "C1": float(rng.uniform(6.0, 18.0)), "C2": C2},
        "expansion": {"alpha": float(rng.uniform(2e-5, 2e-4))},
        "service": {"temperature": [T_ref - 0.6 * C2, T_ref + 50.0], "time": [1e-2, 1e6]},
    }
    file = folder / f"random{seed}.card.toml"
    file.write_text(card_text(tables))
    return file


@pytest.mark.parametrize("seed", range(CARDS))
def test_a_correct_routine_raises_no_false_alarm(seed, built, tmp_path):
    assert wrong(audited(built(card=random_card(tmp_path, seed)), quick=False)) == {}
