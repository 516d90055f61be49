"""Effects after an alarm, against other programs where there are any."""

import numpy as np
import pytest
from scipy import stats

from auditd.errors import BadInput, NotTestable
from auditd.sequential.effect import (
    amplitude,
    inheritance,
    intraclass,
    lag_one,
    neighbours,
    shift,
    spread_ratio,
)


@pytest.fixture
def rng():
    return np.random.default_rng(12)


def test_a_shift_has_welchs_interval(rng):
    """scipy.stats.ttest_ind without equal variances gives the same interval, where no neighbours agree."""
    before, after = rng.normal(size=80), rng.normal(1.0, 2.0, size=50)
    before[::2], before[1::2] = np.split(np.sort(before), 2)
    after[::2], after[1::2] = np.split(np.sort(after), 2)
    expected = stats.ttest_ind(after, before, equal_var=False).confidence_interval(0.95)
    found = shift(before, after)
    assert (found.low, found.high) == pytest.approx((expected.low, expected.high), abs=1e-12)


def test_intraclass_correlation_agrees_with_pingouin(rng):
    """Balanced levels: pingouin's ICC(1,1) and its F interval."""
    import pandas as pd
    import pingouin

    table = rng.normal(size=(12, 5)) + rng.normal(size=(12, 1))
    data = pd.DataFrame({"t": np.repeat(range(12), 5), "r": np.tile(range(5), 12), "y": table.ravel()})
    row = pingouin.intraclass_corr(data, targets="t", raters="r", ratings="y").iloc[0]
    found = intraclass(table.ravel(), np.repeat(range(12), 5))
    assert found.value == pytest.approx(row["ICC"], abs=1e-9)
    interval = next(row[name] for name in row.index if name.startswith("CI95"))
    assert (found.low, found.high) == pytest.approx(tuple(interval), abs=0.006)  # printed to two digits


@pytest.mark.parametrize(
    ("name", "truth"),
    [
        ("shift", 1.0),
        ("lag", 0.5),
        ("shift of a series", 1.0),
        ("icc", 0.3),
        ("spread", 1.6),
        ("amplitude", 0.7),
        ("lineage", 0.6),
    ],
)
def test_intervals_cover_what_was_planted(name, truth):
    """200 samples of 150 runs: coverage of the 95 % intervals is not below what chance allows, 0.89."""
    covered = 0
    for seed in range(200):
        rng = np.random.default_rng([6, seed])
        found = _estimate(name, truth, rng)
        covered += found.low <= truth <= found.high
    assert covered >= 178


def _estimate(name, truth, rng):
    n = 150
    e = rng.normal(size=n)
    level, times, parent = np.repeat(np.arange(15), 10), np.arange(n) * 3000.0, rng.normal(size=n)
    cycle = np.sin(2 * np.pi * times / 86_400 + 1.0)
    estimates = {
        "shift": lambda: shift(rng.normal(size=200), e + truth),
        "shift of a series": lambda: shift(_ar1(rng.normal(size=200), 0.4), _ar1(e, 0.4) + truth),
        "lag": lambda: lag_one(_ar1(e, truth)),
        "icc": lambda: intraclass(
            np.sqrt(truth) * rng.normal(size=15)[level] + np.sqrt(1 - truth) * e, level
        ),
        "spread": lambda: spread_ratio(rng.normal(size=200), truth * e),
        "amplitude": lambda: amplitude(e + truth * cycle, times, 86_400.0),
        "lineage": lambda: inheritance(truth * parent + np.sqrt(1 - truth**2) * e, parent),
    }
    return estimates[name]()


def _ar1(e, phi):
    x = e.copy()
    for t in range(1, x.size):
        x[t] = phi * x[t - 1] + np.sqrt(1 - phi**2) * e[t]
    return x


def test_neighbours_are_of_one_level_and_skip_what_has_no_score():
    """Pairs within levels, in order; NaN is passed over."""
    first, second = neighbours([1.0, 10.0, 2.0, np.nan, 3.0, 20.0], ["a", "b", "a", "a", "a", "b"])
    assert first.tolist() == [1.0, 2.0, 10.0]
    assert second.tolist() == [2.0, 3.0, 20.0]


def test_too_few_runs_and_wrong_shapes_are_said(rng):
    """Below eight runs there is no estimate; constants have none either."""
    with pytest.raises(NotTestable):
        shift(rng.normal(size=50), rng.normal(size=7))
    with pytest.raises(NotTestable):
        lag_one(rng.normal(size=8))
    with pytest.raises(NotTestable):
        lag_one(np.ones(50))
    with pytest.raises(NotTestable):
        intraclass(rng.normal(size=40), np.zeros(40))
    with pytest.raises(NotTestable):
        spread_ratio(np.ones(50), rng.normal(size=50))
    with pytest.raises(NotTestable):
        amplitude(rng.normal(size=50), np.zeros(50), 86_400.0)
    with pytest.raises(NotTestable):
        inheritance(rng.normal(size=50), np.full(50, np.nan))
    with pytest.raises(BadInput):
        intraclass(rng.normal(size=40), np.zeros(39))
