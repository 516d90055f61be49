"""Intraclass correlations against Shrout & Fleiss and other published tables."""

import numpy as np
import pingouin
import pytest

from auditd.stats import intraclass, one_way
from auditd.stats.intraclass import mean_squares

# Shrout & Fleiss (1979), Psychological Bulletin 86:420-428, Table 2: six targets rated by four judges.
SHROUT_FLEISS = np.array(
    [[9, 2, 5, 8], [6, 1, 3, 2], [8, 4, 6, 8], [7, 1, 2, 6], [10, 5, 6, 9], [6, 2, 4, 7]], dtype=float
)
FORMS = ("1,1", "2,1", "3,1", "1,k", "2,k", "3,k")
# Table 4 (published), and the limits by the paper's formulas (published to two decimals).
ICC = (0.17, 0.29, 0.71, 0.44, 0.62, 0.91)
LOW = (-0.13, 0.02, 0.34, -0.88, 0.07, 0.68)
HIGH = (0.72, 0.76, 0.95, 0.91, 0.93, 0.99)
# The same to more digits (computed independently).
EIGHT_DIGITS = (0.165742, 0.289764, 0.714841, 0.442797, 0.620051, 0.909316)
LIMITS = (
    (-0.13293, 0.72256), (0.01879, 0.76108), (0.34246, 0.94586),
    (-0.88444, 0.91242), (0.07114, 0.92723), (0.67567, 0.98589),
)  # fmt: skip


def test_six_forms_typed_in():
    """All six correlations and their intervals of Shrout & Fleiss's Table 4."""
    result = intraclass(SHROUT_FLEISS)
    got = np.array([result[form] for form in FORMS])
    assert got[:, 0] == pytest.approx(ICC, abs=0.0058)
    assert got[:, 1] == pytest.approx(LOW, abs=0.0058)
    assert got[:, 2] == pytest.approx(HIGH, abs=0.0058)
    assert got[:, 0] == pytest.approx(EIGHT_DIGITS, abs=5e-7)
    assert got[:, 1:] == pytest.approx(np.array(LIMITS), abs=5e-6)
    assert list(result) == list(FORMS)


def test_mean_squares_of_the_table():
    """Shrout & Fleiss's Table 3: BMS 11.24, WMS 6.26, JMS 32.49, EMS 1.02 (recalled)."""
    squares = mean_squares(SHROUT_FLEISS)
    got = (squares.rows, squares.within, squares.columns, squares.error)
    assert got == pytest.approx((11.24, 6.26, 32.49, 1.02), abs=0.0058)


def test_shared_copy_is_the_same_table(columns):
    """The reference folder's ratings give Table 4 too."""
    target, judge, rating = columns("shrout_fleiss1979.csv", "target", "judge", "rating")
    table = np.empty((6, 4))
    table[target.astype(int) - 1, judge.astype(int) - 1] = rating
    assert [intraclass(table)[form][0] for form in FORMS] == pytest.approx(ICC, abs=0.0058)


def test_batches_of_determinations(columns):
    """NIST e-Handbook 7.4.4 in Dataplot's table: ICC 86.68 %, 95 % interval 54.490128–98.364796 %
    (published).
    """
    batch, y = columns("eh_batches744.csv", "batch", "y")
    result = one_way(y, batch)
    assert 100 * result.icc == pytest.approx(86.68, abs=0.0058)
    assert 100 * result.icc_low == pytest.approx(54.490128, abs=5.9e-7)
    assert 100 * result.icc_high == pytest.approx(98.364796, abs=5.5e-7)


def test_dyestuff(columns):
    """ICC and exact F interval of Dyestuff after Searle et al. (1992) (computed independently)."""
    result = one_way(*columns("lme4_dyestuff.csv", "Yield", "Batch"))
    assert result.icc == pytest.approx(0.4184874148933646, abs=4.2e-10)
    assert result.icc_low == pytest.approx(0.08383605066059334, abs=8.4e-11)
    assert result.icc_high == pytest.approx(0.8478768154733808, abs=8.5e-10)


def test_balanced_table_agrees_with_one_way():
    """Form 1,1 is the intraclass correlation of the one-way layout, with the same interval."""
    table = one_way(SHROUT_FLEISS.ravel(), np.repeat(np.arange(6), 4))
    got = intraclass(SHROUT_FLEISS)["1,1"]
    assert (table.icc, table.icc_low, table.icc_high) == pytest.approx(got, rel=1e-10)


def test_wine_agrees_with_pingouin():
    """pingouin's wine ratings: documented .728 .728 .729 .914 .914 .915, which it checked against R's
    psych.
    """
    frame = pingouin.read_dataset("icc")
    table = frame.pivot_table(index="Wine", columns="Judge", values="Scores").to_numpy()
    result = intraclass(table)
    documented = (0.728, 0.728, 0.729, 0.914, 0.914, 0.915)
    assert [result[form][0] for form in FORMS] == pytest.approx(documented, abs=5.5e-4)
    other = pingouin.intraclass_corr(data=frame, targets="Wine", raters="Judge", ratings="Scores")
    assert [result[form][0] for form in FORMS] == pytest.approx(other["ICC"].tolist(), abs=1e-9)
    limits = np.array([result[form][1:] for form in FORMS])
    assert limits == pytest.approx(np.vstack(other.filter(like="CI95").iloc[:, 0].to_numpy()), abs=0.0051)
