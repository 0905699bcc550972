"""Settings and samples shared by all tests."""

from __future__ import annotations

import pytest
from hypothesis import HealthCheck, settings

from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import WLF

pytest_plugins = ["pytester"]

# The same examples on every machine, and no verdict on speed: a first call may compile. Another profile by name:
# pytest --hypothesis-profile=default
settings.register_profile("ci", derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("ci")


@pytest.fixture
def resin() -> Material:
    """An invented sealing resin: four shear terms, one bulk term, WLF, thermal expansion."""
    return Material(
        shear=PronySeries.from_fractions(1.1e9, [0.06, 0.09, 0.3, 0.4], [1e-3, 0.1, 10.0, 2e3]),
        bulk=PronySeries.from_fractions(3.7e9, [0.2], [1.0]),
        shift=WLF(C1=14.2, C2=61.0, T_ref=353.15),
        expansion=6.2e-5,
    )
