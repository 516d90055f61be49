"""Efficiency factors equal published ones."""

import itertools

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.schedule import efficiency_factor


def numbered(text):
    return [[int(entry) - 1 for entry in block.split()] for block in text.split(",")]


def test_balanced_design_of_ten_treatments_in_fifteen_blocks():
    """Published: the design and its efficiency factor 0.8333333 in the tests of the R package dae (C. Brien),
    tests/testthat/testCanon.r, "BIBD example"; by theory λt/(rk) = 2·10/(6·4)."""
    blocks = numbered(
        "1 2 3 4, 1 2 5 6, 1 3 7 8, 1 4 9 10, 1 5 7 9, 1 6 8 10, 2 3 6 9, 2 4 7 10, "
        "2 5 8 10, 2 7 8 9, 3 5 9 10, 3 6 7 10, 3 4 5 8, 4 5 6 7, 4 6 8 9"
    )
    assert efficiency_factor(blocks, 10) == pytest.approx(0.8333333, abs=1e-7)


def test_partially_balanced_design_of_cochran_and_cox():
    """Published: design of Cochran & Cox (1957), Experimental Designs, 2nd ed., p. 379; its harmonic mean is
    0.8823529 in the tests of the R package dae, tests/testthat/testCanon.r."""
    blocks = numbered("1 4 2 5, 2 5 3 6, 3 6 1 4, 4 1 5 2, 5 2 6 3, 6 3 4 1")
    assert efficiency_factor(blocks, 6) == pytest.approx(0.8823529, abs=1e-7)


def test_seven_treatments_in_seven_blocks_of_three():
    """Cochran & Cox (1957), plan 11.7: E = .78 (figure from memory, λt/(rk) = 7/9 by theory)."""
    blocks = numbered("1 2 4, 2 3 5, 3 4 6, 4 5 7, 5 6 1, 6 7 2, 7 1 3")
    assert efficiency_factor(blocks, 7) == pytest.approx(7 / 9, abs=1e-12)
    assert round(efficiency_factor(blocks, 7), 2) == 0.78


def test_complete_blocks_have_efficiency_one_and_unconnected_blocks_none():
    assert efficiency_factor([[0, 1, 2]] * 4, 3) == pytest.approx(1.0)
    assert efficiency_factor([[0, 1], [2, 3]], 4) == 0.0
    assert efficiency_factor([[0]], 1) == 1.0


def test_efficiency_is_the_ratio_of_average_variances_from_least_squares():
    """Independent of the roots: variances of all differences by regression on treatments and blocks."""
    blocks = [*[list(block) for block in itertools.combinations(range(5), 2)][:9], [3, 4]]
    rows = [(treatment, number) for number, block in enumerate(blocks) for treatment in block]
    design = np.zeros((len(rows), 5 + len(blocks)))
    for i, (treatment, number) in enumerate(rows):
        design[i, treatment] = design[i, 5 + number] = 1
    covariance = np.linalg.pinv(design.T @ design)[:5, :5]
    pairs = list(itertools.combinations(range(5), 2))
    variances = [covariance[i, i] + covariance[j, j] - 2 * covariance[i, j] for i, j in pairs]
    assert efficiency_factor(blocks, 5) == pytest.approx((2 / 4) / np.mean(variances), rel=1e-9)


@pytest.mark.parametrize(
    ("blocks", "n_treatments", "message"),
    [
        ([], 2, "needs treatments"),
        ([[0], []], 1, "at least one run"),
        ([[0, 5]], 2, "treatment 5"),
        ([[0, 1]], 3, "treatment 2 occurs in no block"),
    ],
)
def test_malformed_designs_are_refused(blocks, n_treatments, message):
    with pytest.raises(BadInput, match=message):
        efficiency_factor(blocks, n_treatments)
