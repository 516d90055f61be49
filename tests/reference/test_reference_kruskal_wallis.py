"""Kruskal and Wallis's test against published values."""

import numpy as np
import pingouin
import pytest
import scipy.stats

from auditd.stats import kruskal_wallis

# Hollander & Wolfe (1973), p. 116: mucociliary efficiency.
NORMAL, OBSTRUCTIVE = (2.9, 3.0, 2.5, 2.6, 3.2), (3.8, 2.7, 4.0, 2.4)
ASBESTOSIS = (2.8, 3.4, 3.7, 2.2, 2.0)


def test_mucociliary_efficiency_typed_in():
    """R, example(kruskal.test): H .77143, df 2, p .68 (published)."""
    result = kruskal_wallis(NORMAL + OBSTRUCTIVE + ASBESTOSIS, ["n"] * 5 + ["o"] * 4 + ["a"] * 5)
    assert result.statistic == pytest.approx(0.77143, abs=5.8e-6)
    assert result.pvalue == pytest.approx(0.68, abs=0.0058)
    assert result.df == 2


def test_mucociliary_efficiency_from_the_shared_copy(columns):
    """The same from the reference folder, where p is .679965."""
    result = kruskal_wallis(*columns("hollander_wolfe_mucociliary.csv", "y", "group"))
    assert result.statistic == pytest.approx(0.77143, abs=5.8e-6)
    assert result.pvalue == pytest.approx(0.679965, abs=5.5e-7)


def test_ozone_by_month(columns):
    """R, example(kruskal.test), airquality: H 29.267 with ties, df 4, p 6.901e-06 (published)."""
    result = kruskal_wallis(*columns("airquality_ozone.csv", "Ozone", "Month"))
    assert result.statistic == pytest.approx(29.267, abs=0.00055)
    assert result.pvalue == pytest.approx(6.901e-6, abs=5.8e-10)
    assert result.df == 4


def test_speed_of_light(columns):
    """Michelson's five experiments: H 15.022125 (computed independently)."""
    experiment, speed = columns("morley.csv", "Expt", "Speed")
    assert kruskal_wallis(speed, experiment).statistic == pytest.approx(15.022124661246552, abs=1.6e-8)


def test_agrees_with_other_libraries_under_ties():
    """scipy's kruskal and pingouin's give the same on penguins' flipper lengths, which have many ties."""
    frame = pingouin.read_dataset("penguins")[["species", "flipper_length_mm"]].dropna()
    x, species = frame["flipper_length_mm"].to_numpy(), frame["species"].to_numpy()
    ours = kruskal_wallis(x, species)
    theirs = scipy.stats.kruskal(*(x[species == s] for s in np.unique(species)))
    table = pingouin.kruskal(data=frame, dv="flipper_length_mm", between="species")
    assert (ours.statistic, ours.pvalue) == pytest.approx((theirs.statistic, theirs.pvalue), rel=1e-10)
    assert ours.statistic == pytest.approx(float(table["H"].iloc[0]), rel=1e-10)
