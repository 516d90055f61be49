"""Control charts and their average run lengths against published figures."""

import numpy as np
import pandas as pd
import pytest
from scipy.optimize import brentq
from scipy.stats import norm

from auditd.stats import cusum, cusum_arl, ewma, ewma_arl

SHIFTS = (0, 0.25, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4, 5)
# NIST/SEMATECH e-Handbook 6.3.2.3, means of 20 groups; target 325, k = 0.3175, h = 4.1959 in the data's unit.
HANDBOOK_CUSUM = (
    324.925, 324.675, 324.725, 324.35, 325.35, 325.225, 324.125, 324.525, 325.225, 324.6,
    324.625, 325.15, 328.325, 327.25, 327.825, 328.5, 326.675, 327.775, 326.875, 328.35,
)  # fmt: skip
# NIST/SEMATECH e-Handbook 6.3.2.4: 20 values; target 50, s = 2.0539, weight 0.3, limits of 3.
HANDBOOK_EWMA = (
    52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0, 50.1, 51.2, 50.5, 49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6,
    52.4, 53.6, 52.1,
)  # fmt: skip


def table(shared_folder, name):
    """One published data file as a frame."""
    return pd.read_csv(shared_folder / "reference" / name)


def to_print(value):
    """Half a unit of the last of three significant digits, the precision of these tables."""
    return 0.55 * 10.0 ** (np.floor(np.log10(value)) - 2)


@pytest.mark.parametrize(
    ("h", "head_start", "lengths"),
    [
        (4, 0.0, (168.0, 74.2, 26.6, 13.3, 8.38, 4.75, 3.34, 2.62, 2.19, 1.71, 1.31)),
        (4, 2.0, (149.0, 62.7, 20.1, 8.97, 5.29, 2.86, 2.01, 1.59, 1.32, 1.07, 1.01)),
        (5, 0.0, (465.0, 139.0, 38.0, 17.0, 10.4, 5.75, 4.01, 3.11, 2.57, 2.01, 1.69)),
    ],
)
def test_two_sided_cusum_tables(h, head_start, lengths):
    """Published: Lucas & Crosier (1982), Table 1 (h = 4); Montgomery, Table 9.3 (h = 5, from memory)."""
    for shift, length in zip(SHIFTS, lengths, strict=True):
        # The tables print truncated or rounded third digits.
        got = cusum_arl(0.5, h, shift, head_start=head_start)
        assert got == pytest.approx(length, abs=1.1 * to_print(length))


def test_cusum_tables_to_all_computed_digits(shared_folder):
    """Computed for this project by another program: the same tables to 1e-7."""
    four = table(shared_folder, "data/arl_cusum_k05_h4.csv")
    five = table(shared_folder, "data/arl_cusum_k05_h5.csv")
    for shift, plain, fast in zip(four.shift_sigma, four.arl_computed, four.arl_fir_computed, strict=True):
        assert cusum_arl(0.5, 4, shift) == pytest.approx(plain, rel=1e-9)
        assert cusum_arl(0.5, 4, shift, head_start=2) == pytest.approx(fast, rel=1e-7)
    for shift, plain in zip(five.shift_sigma, five.arl_computed, strict=True):
        assert cusum_arl(0.5, 5, shift) == pytest.approx(plain, rel=1e-9)


def test_one_sided_cusum():
    """e-Handbook 6.3.2.3.1 (336, 930, from memory); published: Brook & Evans (1972), section 4.3."""
    assert cusum_arl(0.5, 4, 0, sides=1) == pytest.approx(336, abs=0.7)
    assert cusum_arl(0.5, 5, 0, sides=1) == pytest.approx(930, abs=0.99)
    assert cusum_arl(0.5, 3, 0, sides=1) == pytest.approx(117.59, abs=0.006)
    assert cusum_arl(0.5, 3, 1.5, sides=1) == pytest.approx(3.75, abs=0.0058)


def test_cusum_without_allowance():
    """Published: Vance (1986), J. Qual. Technol. 18:189, Table 1, one-sided k = 0, h = 10."""
    lengths = {-0.125: 400.28, 0: 124.66, 0.125: 59.3, 0.25: 36.71, 0.5: 20.37, 0.75: 14.06, 1: 10.75}
    for shift, length in lengths.items():
        assert cusum_arl(0, 10, shift, sides=1) == pytest.approx(length, abs=0.006)
    assert cusum_arl(0, 10, -0.25, sides=1) == pytest.approx(2071.51, abs=0.07)


def test_designs_for_370():
    """From memory, reproduced: Hawkins (1993), in Montgomery Table 9.4: h for a run length of 370."""
    for k, h in ((0.25, 8.01), (0.5, 4.77), (0.75, 3.34), (1.0, 2.52), (1.25, 1.99), (1.5, 1.61)):
        got = brentq(lambda limit, k=k: cusum_arl(k, limit, 0) - 370, h - 0.5, h + 0.5, xtol=1e-4)
        assert got == pytest.approx(h, abs=0.0063)


def test_cusum_arl_against_a_markov_chain():
    """Independent method: Brook & Evans' chain of 400 states, refined twice and extrapolated."""

    def chain(k, h, shift, n_states):
        width = 2 * h / (2 * n_states - 1)
        states = np.arange(n_states) * width
        upper = norm.cdf(states[None, :] + width / 2 - states[:, None] + k - shift)
        lower = norm.cdf(states[None, :] - width / 2 - states[:, None] + k - shift)
        lower[:, 0] = 0
        return np.linalg.solve(np.eye(n_states) - (upper - lower), np.ones(n_states))[0]

    for k, h, shift in ((0.5, 4.0, 0.0), (0.25, 8.0, 0.5), (1.0, 2.5, -0.3)):
        coarse, fine = chain(k, h, shift, 200), chain(k, h, shift, 400)
        extrapolated = fine + (fine - coarse) / 3
        assert cusum_arl(k, h, shift, sides=1) == pytest.approx(extrapolated, rel=2e-3)


def test_head_start_against_simulation():
    """Independent method: 20,000 simulated charts with head starts on both sides."""
    rng = np.random.default_rng(11)
    n_charts, k, h, start, shift = 20_000, 0.5, 4.0, 2.0, 0.5
    upper, lower = np.full(n_charts, start), np.full(n_charts, start)
    lengths, alive = np.zeros(n_charts), np.arange(n_charts)
    for step in range(1, 2000):
        z = rng.normal(shift, 1, alive.size)
        upper, lower = np.maximum(0, upper + z - k), np.maximum(0, lower - z - k)
        over = (upper > h) | (lower > h)
        lengths[alive[over]] = step
        alive, upper, lower = alive[~over], upper[~over], lower[~over]
        if not alive.size:
            break
    error = lengths.std() / np.sqrt(n_charts)
    assert lengths.mean() == pytest.approx(cusum_arl(k, h, shift, head_start=start), abs=4 * error)


CROWDER_SHIFTS = tuple(0.25 * j for j in range(17))
CROWDER = {
    # Crowder (1987), Table 1, L = 2; at lambda = 0.5 and shift 1.25 the print (3.95) is wrong, exact 3.5902.
    0.5: (
        26.45, 20.12, 11.89, 7.29, 4.91, 3.5902, 2.8, 2.29, 1.94, 1.7, 1.51, 1.37, 1.26, 1.18, 1.12, 1.08,
        1.05,
    ),
    0.05: (
        127.53, 43.94, 18.97, 11.64, 8.38, 6.56, 5.41, 4.62, 4.04, 3.61, 3.26, 2.99, 2.76, 2.56, 2.39, 2.26,
        2.15,
    ),
}  # fmt: skip


@pytest.mark.parametrize("lam", [0.5, 0.05])
def test_ewma_tables_of_crowder(lam):
    """Published: Crowder (1987), Technometrics 29:401, Table 1, two-sided, fixed limits."""
    for shift, length in zip(CROWDER_SHIFTS, CROWDER[lam], strict=True):
        assert ewma_arl(lam, 2, shift) == pytest.approx(length, abs=0.006)


def test_ewma_tables_to_all_computed_digits(shared_folder):
    """Computed for this project by another program: Crowder's two columns to 1e-10."""
    d = table(shared_folder, "data/arl_ewma_crowder1987.csv")
    for shift, half, twentieth in zip(d.shift_sigma, d.l50_computed, d.l05_computed, strict=True):
        assert ewma_arl(0.5, 2, shift) == pytest.approx(half, rel=1e-10)
        assert ewma_arl(0.05, 2, shift) == pytest.approx(twentieth, rel=1e-10)


def test_ewma_designs_of_lucas_and_saccucci():
    """Published: Lucas & Saccucci (1990), Technometrics 32:1: designs of run length 500 in control."""
    half = (500, 255, 88.8, 35.9, 17.5, 6.53, 3.63, 2.5, 1.93, 1.58, 1.34, 1.07)
    shifts = (0, 0.25, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 3.5, 4, 5)
    for shift, length in zip(shifts, half, strict=True):
        assert ewma_arl(0.5, 3.071, shift) == pytest.approx(length, abs=1.1 * to_print(length))
    third = (500, 76.7, 29.3, 17.6, 12.6, 8.07, 5.99, 4.8, 4.03, 3.49, 3.11, 2.55)
    for shift, length in zip(shifts, third, strict=True):
        assert ewma_arl(0.03, 2.437, shift) == pytest.approx(length, abs=1.1 * to_print(length))


def test_ewma_of_weight_one_is_shewharts_chart():
    """Theory: with all weight on the newest value the run length is geometric (370.398 at three sigma)."""
    for shift in (0.0, 0.5, 2.0):
        outside = norm.sf(3 - shift) + norm.cdf(-3 - shift)
        assert ewma_arl(1, 3, shift) == pytest.approx(1 / outside, rel=1e-10)


def test_montgomery_cusum(shared_folder):
    """Published: Montgomery, Tables 9.1 and 9.2, C+; from memory: signal at 29, N+ = 7, last 22."""
    expected = [
        0, 0, 0, 1.16, 2.82, 2.5, 0.04, 1.0, 0, 0, 0, 0.97, 0.98, 0, 0, 0, 0.12, 0, 0, 0.34, 0.74, 0,
        1.79, 2.79, 2.89, 3.47, 3.35, 4.47, 5.28,
    ]  # fmt: skip
    got = cusum(table(shared_folder, "data/montgomery_table91.csv").x, 10, 1, 0.5, 5)
    assert got.path[:29, 0] == pytest.approx(expected, abs=0.006)
    assert (got.alarm_index, got.last_before, got.alarm_side) == (28, 21, "upper")
    assert got.alarm_index - got.last_before == 7


def test_montgomery_ewma(shared_folder):
    """Recalled, reproduced: Montgomery, Example 9.2 (lambda 0.1, L 2.7): limits, averages, signal."""
    got = ewma(table(shared_folder, "data/montgomery_table91.csv").x, 10, 1, 0.1, 2.7)
    limits = [got.high[0], got.low[0], got.high[1], got.low[1], got.high[-1], got.low[-1]]
    assert limits == pytest.approx([10.27, 9.73, 10.36, 9.64, 10.62, 9.38], abs=0.0058)
    assert got.path[:2] == pytest.approx([9.945, 9.7495], abs=5.8e-5)
    assert got.alarm_index == 28


def test_handbook_cusum():
    """From memory, reproduced: e-Handbook 6.3.2.3: sums high and low, first alarm at group 14."""
    got = cusum(HANDBOOK_CUSUM, 325, 1, 0.3175, 4.1959)
    high = [0, 0, 0, 0, 0.03, 0, 0, 0, 0, 0, 0, 0, 3.01, 4.94, 7.45, 10.63, 11.99, 14.44, 16.00, 19.04]
    low = [0, 0.01, 0, 0.33, 0, 0, 0.56, 0.72, 0.17, 0.26, 0.31, 0, 0, 0, 0, 0, 0, 0, 0, 0]
    assert got.path[:, 0] == pytest.approx(high, abs=0.0055)
    assert got.path[:, 1] == pytest.approx(low, abs=0.0065)
    assert (got.alarm_index, got.last_before) == (13, 11)


def test_handbook_ewma():
    """Published figures, from memory, reproduced: e-Handbook 6.3.2.4: averages and fixed limits, no alarm."""
    got = ewma(HANDBOOK_EWMA, 50, 2.0539, 0.3, 3, fixed_limits=True)
    averages = [
        50.60, 49.52, 50.56, 50.18, 50.16, 49.21, 49.75, 49.85, 50.26, 50.33, 50.11, 49.36, 49.52, 50.05,
        49.38, 49.92, 50.73, 51.23, 51.94, 51.99,
    ]  # fmt: skip
    assert got.path == pytest.approx(averages, abs=0.0055)
    assert (got.high[0], got.low[0]) == pytest.approx((52.5884, 47.4115), abs=1e-4)
    assert got.alarm_index is None
