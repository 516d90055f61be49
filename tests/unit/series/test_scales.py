"""The audited scales: order kept, what a scale cannot hold left out, no warning of NumPy."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from auditd.series.scales import to_scale

ANY = arrays(float, st.integers(0, 30), elements=st.floats(allow_nan=True, allow_infinity=True))
HOLDS = {
    "linear": np.isfinite,
    "log": lambda x: np.isfinite(x) & (x > 0),
    "logit": lambda x: np.isfinite(x) & (x > 0) & (x < 1),
}


@pytest.mark.parametrize("scale", HOLDS)
@given(values=ANY)
def test_a_scale_holds_what_it_can_and_leaves_the_rest_out(scale, values):
    """NaN stands exactly where a value is off the scale; order is kept; the input is not changed."""
    before = values.copy()
    found = to_scale(values, scale)
    holds = HOLDS[scale](values)
    np.testing.assert_array_equal(np.isfinite(found), holds)
    np.testing.assert_array_equal(values, before)
    order = np.argsort(values[holds], kind="stable")
    assert (np.diff(found[holds][order]) >= 0).all()


def test_log_and_logit_are_natural():
    """ln e = 1; the log odds of 0.75 are ln 3."""
    assert to_scale(np.array([np.e]), "log")[0] == pytest.approx(1)
    assert to_scale(np.array([0.75]), "logit")[0] == pytest.approx(np.log(3))
