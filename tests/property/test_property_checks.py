"""Any small campaign is answered in numbers or reasons, whatever the layout of its cells and levels."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from series_made import BEGAN, series

from auditd.checks.full_audit import audit_series


@st.composite
def campaigns(draw):
    n = draw(st.integers(1, 60))
    codes = st.lists(st.integers(0, draw(st.integers(0, 12))), min_size=n, max_size=n)
    grid = draw(st.sampled_from([1.0, 0.5, 1e-9, 1e12]))
    values = draw(st.lists(st.integers(-40, 40), min_size=n, max_size=n))
    started = draw(st.lists(st.integers(0, 10_000_000), min_size=n, max_size=n))
    parents = [draw(st.integers(-1, k - 1)) if k else -1 for k in range(n)] if draw(st.booleans()) else None
    return {
        "values": grid * np.array(values, dtype=float),
        "cells": draw(codes),
        "nuisance": {"host": draw(codes)},
        "started": BEGAN + np.array(started, dtype=float),
        "finished": BEGAN + np.array(started, dtype=float) + 60.0,
        "parents": parents,
        "ordered": draw(st.booleans()),
    }


@given(campaigns())
@settings(max_examples=60, deadline=None)
def test_every_campaign_is_answered(made):
    """A finding has a finite p and statistic, or it is not testable and says why; nothing warns."""
    values = made.pop("values")
    answers, _ = audit_series(series(values, **made))
    for one in answers:
        assert (one.pvalue is None) == (one.verdict == "not testable")
        if one.pvalue is None:
            assert one.reason
            continue
        assert 0 <= one.pvalue <= one.adjusted_pvalue <= 1
        assert np.isfinite(one.statistic)
        assert one.effect is None or np.isfinite(one.effect.value)


@given(campaigns())
@settings(max_examples=30, deadline=None)
def test_an_audit_repeats_itself(made):
    """The same runs give the same findings."""
    values = made.pop("values")
    assert audit_series(series(values, **made)) == audit_series(series(values, **made))
