"""One-way analysis of variance against certified and published tables."""

import math
import pathlib

import numpy as np
import pingouin
import pytest
import scipy.stats
import statsmodels.api as sm
from scipy.stats import f as f_law

from auditd.stats import one_way

STRD = pathlib.Path(scipy.stats.__file__).parent / "tests" / "data" / "nist_anova"
# NIST StRD Analysis of Variance, certified F (published), and the relative error that float64 input allows:
# SmLs04-06 have 7 constant leading digits, SmLs07-09 have 13.
CERTIFIED = (
    ("SiRstv", 1.18046237440255, 1e-11),
    ("AtmWtAg", 15.9467335677930, 1e-9),
    ("SmLs01", 21.0, 1e-12),
    ("SmLs02", 201.0, 1e-12),
    ("SmLs03", 2001.0, 1e-12),
    ("SmLs04", 21.0, 1e-8),
    ("SmLs05", 201.0, 1e-8),
    ("SmLs06", 2001.0, 1e-8),
    ("SmLs07", 21.0, 1e-4),
    ("SmLs08", 201.0, 1e-4),
    ("SmLs09", 2001.0, 1e-4),
)


@pytest.mark.parametrize(("name", "certified", "rel"), CERTIFIED)
def test_f_reaches_the_certified_digits(name, certified, rel):
    """F of all eleven NIST StRD sets, as carried by scipy, is certified to the accuracy of the input."""
    treatment, y = np.loadtxt(STRD / f"{name}.dat", skiprows=60, unpack=True)
    assert one_way(y, treatment).statistic == pytest.approx(certified, rel=rel)


@pytest.mark.parametrize(
    ("name", "certified", "rel"),
    [row for row in CERTIFIED if row[0] in {"SiRstv", "SmLs01", "SmLs02", "SmLs04", "SmLs05", "SmLs07"}],
)
def test_f_from_the_shared_copies(columns, name, certified, rel):
    """The same from the reference folder, with the degrees of freedom of the certificate."""
    treatment, y = columns(f"nist_anova_{name.lower()}.csv", "treatment", "y")
    result = one_way(y, treatment)
    assert result.statistic == pytest.approx(certified, rel=rel)
    assert result.df == (np.unique(treatment).size - 1, y.size - np.unique(treatment).size)


def test_strd_table_of_sirstv():
    """NIST StRD SiRstv, certified: sums of squares 5.11462616000000E-02 and 2.16636560000000E-01 (4 and 20
    df).
    """
    treatment, y = np.loadtxt(STRD / "SiRstv.dat", skiprows=60, unpack=True)
    result = one_way(y, treatment)
    assert result.df == (4, 20)
    assert result.square_between == pytest.approx(5.11462616e-2, rel=1e-10)
    assert result.square_within == pytest.approx(2.1663656e-1, rel=1e-10)


def test_five_machines(columns):
    """NIST e-Handbook 3.2.3.1: SSB .000137, SSW .000132 (recalled); F is 5.21 exactly, 4.86 from rounded
    squares.
    """
    machine, diameter = columns("eh_machine25.csv", "machine", "diameter")
    result = one_way(diameter, machine)
    assert result.square_between == pytest.approx(0.000137, abs=5.5e-7)
    assert result.square_within == pytest.approx(0.000132, abs=5.5e-7)
    assert result.statistic == pytest.approx(5.21, abs=0.0058)
    assert result.df == (4, 20)


def test_three_levels(columns):
    """NIST e-Handbook 7.4.3.3: SST 27.897, SSE 17.452, F(2, 12) 9.59, p .00325 (recalled)."""
    level, y = columns("eh_anova743.csv", "level", "y")
    result = one_way(y[level <= 3], level[level <= 3])
    assert result.square_between == pytest.approx(27.897, abs=0.00055)
    assert result.square_within == pytest.approx(17.452, abs=0.00055)
    assert result.statistic == pytest.approx(9.59, abs=0.0058)
    assert result.pvalue == pytest.approx(0.00325, abs=5.8e-6)
    assert result.df == (2, 12)


def test_gear_batches(columns):
    """NIST GEAR.DAT: F(9, 90) and p (computed independently, no published figure)."""
    batch, diameter = columns("eh_gear.csv", "batch", "diameter")
    result = one_way(diameter, batch)
    assert result.statistic == pytest.approx(2.2969124133585868, abs=2.3e-9)
    assert result.pvalue == pytest.approx(0.022660819278638635, abs=2.3e-11)


def test_batches_of_determinations(columns):
    """NIST e-Handbook 7.4.4: MSB 36.9333, MSW 1.8, F(4, 10) 20.5185 (recalled)."""
    batch, y = columns("eh_batches744.csv", "batch", "y")
    result = one_way(y, batch)
    assert result.square_between / result.df[0] == pytest.approx(36.9333, abs=5.8e-5)
    assert result.square_within / result.df[1] == pytest.approx(1.8, abs=1e-12)
    assert result.statistic == pytest.approx(20.5185, abs=5.8e-5)


def test_speed_of_light_by_experiment(columns):
    """R, example(morley): residual SS 523510 on 95 df (published); F 4.2878, p .0031144, ICC .141181."""
    experiment, speed = columns("morley.csv", "Expt", "Speed")
    result = one_way(speed, experiment)
    assert result.square_within == pytest.approx(523510, abs=0.55)
    assert result.statistic == pytest.approx(4.2878025252621725, abs=4.3e-9)
    assert result.pvalue == pytest.approx(0.0031144460474563118, abs=3.3e-12)
    assert result.icc == pytest.approx(0.141181, abs=5e-7)


def test_speed_of_light_by_run_and_experiment(columns):
    """R, example(morley), Speed ~ Run + Expt: SS 113344, 94514, 410166, F 4.378, p .00307 (published).

    In a balanced two-way layout each factor's sum of squares is that of its own one-way table.
    """
    experiment, run, speed = columns("morley.csv", "Expt", "Run", "Speed")
    by_run, by_experiment = one_way(speed, run), one_way(speed, experiment)
    rest = by_run.square_within - by_experiment.square_between
    f = by_experiment.square_between / 4 / (rest / 76)
    assert (by_run.df[0], by_experiment.df[0]) == (19, 4)
    assert by_run.square_between == pytest.approx(113344, abs=0.55)
    assert by_experiment.square_between == pytest.approx(94514, abs=0.55)
    assert rest == pytest.approx(410166, abs=0.55)
    assert f == pytest.approx(4.378, abs=0.00055)
    assert f_law.sf(f, 4, 76) == pytest.approx(0.00307, abs=5.8e-6)


def test_ceramic_strength_by_batch(columns):
    """NIST e-Handbook 1.4.2.10: pooled t 13.38059, whose square is F, and the batches' moments (recalled)."""
    batch, strength = columns("eh_ceramic.csv", "batch", "strength")
    result = one_way(strength, batch)
    parts = [strength[batch == b] for b in (1, 2)]
    assert math.sqrt(result.statistic) == pytest.approx(13.38059, abs=1.1e-5)
    assert result.n == 480
    assert parts[0].mean() == pytest.approx(688.9987, abs=6.5e-5)
    assert parts[1].mean() == pytest.approx(611.1559, abs=7.9e-5)
    assert [p.std(ddof=1) for p in parts] == pytest.approx([65.54909, 61.85425], abs=5.8e-6)
    assert parts[0].var(ddof=1) / parts[1].var(ddof=1) == pytest.approx(1.123037, abs=5.5e-7)


def test_lithography_by_cassette(columns):
    """NIST e-Handbook 6.6.1 data: F(29, 420), ICC and Kish's design effect (computed independently)."""
    cassette, width = columns("eh_lithography.csv", "cassette", "linewidth")
    result = one_way(width, cassette)
    assert result.df == (29, 420)
    assert result.statistic == pytest.approx(20.802204870852425, abs=2.1e-8)
    assert result.icc == pytest.approx(0.5689928251481902, abs=5.7e-10)
    assert result.design_effect == pytest.approx(8.966, abs=5e-4)


def test_agrees_with_other_libraries_on_unequal_sizes():
    """F and p equal scipy's f_oneway and pingouin's anova on penguins' body mass by species (sizes 151, 68,
    123).
    """
    frame = pingouin.read_dataset("penguins")[["species", "body_mass_g"]].dropna()
    x, species = frame["body_mass_g"].to_numpy(), frame["species"].to_numpy()
    result = one_way(x, species)
    other = scipy.stats.f_oneway(*(x[species == s] for s in np.unique(species)))
    table = pingouin.anova(data=frame, dv="body_mass_g", between="species", detailed=True)
    assert result.statistic == pytest.approx(other.statistic, rel=1e-10)
    assert result.pvalue == pytest.approx(other.pvalue, rel=1e-8)
    assert result.square_between == pytest.approx(table["SS"][0], rel=1e-10)


def test_interval_of_unequal_groups_is_the_pivot_inverted():
    """At each end of the interval the generalised least-squares F of group effects is at its 2.5 % point.

    Wald's pivot (1940), computed here the slow way from the full covariance matrix.
    """
    rng = np.random.default_rng(20250103)
    sizes = (2, 9, 4, 15, 3, 7)
    group = np.repeat(np.arange(6), sizes)
    x = rng.normal(size=40) + rng.normal(size=6)[group]
    result = one_way(x, group)
    levels = []
    for icc in (result.icc_low, result.icc_high):
        same = group[:, None] == group[None, :]
        covariance = np.where(same, icc, 0.0)
        np.fill_diagonal(covariance, 1.0)
        null = sm.GLS(x, np.ones(40), sigma=covariance).fit().ssr
        within = result.square_within / (1.0 - icc)
        levels.append(f_law.cdf((null - within) / 5 / (within / 34), 5, 34))
    assert levels == pytest.approx([0.975, 0.025], abs=1e-9)
