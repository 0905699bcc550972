import numpy as np
import pytest

from matlib.errors import ParameterError
from matlib.shift import NoShift


def test_time_passes_at_its_own_rate_at_every_temperature():
    law = NoShift()
    np.testing.assert_array_equal(law.ln_shift([1.0, 1e5]), [0.0, 0.0])
    np.testing.assert_array_equal(law.mean_rate([1.0, 300.0], 1e5), [1.0, 1.0])
    assert (law.name, law.T_ref, law.pole, law.knots) == ("none", 293.15, None, ())


def test_a_reference_below_absolute_zero_is_refused():
    with pytest.raises(ParameterError, match="`T_ref` must be finite and > 0 K"):
        NoShift(T_ref=-1.0)
