"""Drawings fit for the page: nothing in them acts, nothing is lost, the same numbers give the same bytes."""

import re
from xml.etree import ElementTree as ET

import numpy as np
import pytest

from auditd.report.autocorrelation_chart import autocorrelation_chart
from auditd.report.batch_chart import batch_chart
from auditd.report.binning import binned
from auditd.report.comparison_chart import comparison_chart
from auditd.report.evidence_chart import EvidencePath, evidence_chart
from auditd.report.labels import figures, listed, short, visible
from auditd.report.lag_chart import lag_chart
from auditd.report.observed import Mark, Observed, deviations
from auditd.report.quantile_chart import quantile_chart
from auditd.report.quantile_envelope import normal_envelope, quartile_units
from auditd.report.run_chart import run_chart
from auditd.series.table import Coded

HOSTILE = '<script>alert(1)</script> style="x" $\\frac{1}{0}$ \x1b[31m\u202e\x00'


def observed(values, *, aside=None, hosts=3, names=("n1", "n2", "n3"), marks=()):
    values = np.asarray(values, dtype=np.float64)
    n = len(values)
    aside = np.zeros(n, dtype=bool) if aside is None else aside
    cells = Coded(codes=np.arange(n) % 2, levels=("a", "b"))
    return Observed(
        name=HOSTILE,
        key="response-1",
        axis=HOSTILE,
        place=np.arange(n, dtype=np.float64),
        deviation=deviations(values, cells, aside),
        aside=aside,
        nuisance={"host": Coded(codes=np.arange(n) % hosts, levels=tuple(names))},
        worth=0.5,
        n_cells=2,
        marks=marks,
    )


def noise(n, seed=1):
    return np.random.default_rng(seed).normal(size=n)


def pictures(seen):
    """Every picture of a response."""
    path = EvidencePath(
        epoch=1, first=0, width=2, mean=[0.1, 2.0, 5.0], families={HOSTILE: [0.0, 3.0, 9.0]},
        threshold_first=3.0, threshold_own=6.0,
    )  # fmt: skip
    compared = {
        "a": HOSTILE, "b": "x=2", "estimable": True, "estimate": 0.1, "low": -0.1, "high": 0.3,
        "low_any": -0.2,
        "high_any": 0.4,
        "naive_low": 0.0, "naive_high": 0.2, "n": 10, "n_effective": 5.0, "confidence": 0.95,
        "hedges_g": 0.1, "g_low": -0.1, "g_high": 0.3, "margin": 0.2, "verdict": "undecided", "planned": True,
        "sentence": "s.",
    }  # fmt: skip
    return [
        run_chart(seen, "host"),
        autocorrelation_chart(seen),
        lag_chart(seen),
        quantile_chart(seen),
        batch_chart(seen, "host"),
        evidence_chart(HOSTILE, seen.key, [path], seen.marks),
        comparison_chart(HOSTILE, seen.key, [compared]),
    ]


@pytest.mark.parametrize("n", [300, 5000])
def test_no_drawing_has_style_script_or_outside_reference(n):
    """Hostile names are drawn as text, policy-breaking attributes are gone, references resolve."""
    mark = Mark(label=HOSTILE, since=10, since_low=5, since_high=20, raised=30)
    seen = observed(noise(n), names=(HOSTILE, "n2", "n3"), marks=[mark])
    for picture in pictures(seen):
        root = ET.fromstring(picture.svg)  # noqa: S314 - our own drawing
        assert {element.tag for element in root.iter()} <= {
            "svg", "title", "desc", "g", "path", "use", "text", "defs", "clipPath", "rect", "tspan",
        }  # fmt: skip
        names = [key for element in root.iter() for key in element.attrib]
        assert not [key for key in names if key == "style" or key.startswith("on") or "}" in key]
        ids = [element.get("id") for element in root.iter() if element.get("id")]
        assert len(ids) == len(set(ids))
        assert all(name.startswith(picture.name) for name in ids)
        linked = [element.get("href")[1:] for element in root.iter() if element.get("href")]
        linked += re.findall(r"url\(#([^)]+)\)", picture.svg)
        assert set(linked) <= set(ids)
        assert not re.search(r"#[0-9a-f]{6}\b", picture.svg.split("</desc>")[1])
        assert "\x1b" not in picture.svg
        assert "\u202e" not in picture.svg


def test_the_same_numbers_give_the_same_bytes():
    """Two drawings of the same series are identical."""
    first, second = pictures(observed(noise(200))), pictures(observed(noise(200)))
    assert [one.svg for one in first] == [one.svg for one in second]


def test_an_unknown_colour_cannot_slip_through():
    """A colour that is no role is refused: it would be unreadable in one of light, dark and print."""
    from auditd.report.svg_cleaning import clean_svg

    text = '<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 1 1"><path style="fill: #ff0000"/></svg>'
    with pytest.raises(KeyError):
        clean_svg(text, name="x", title="t", finding="f")


@pytest.mark.parametrize("values", [[], [1.0], [2.0] * 50, [1.0, 2.0, 3.0]])
def test_what_cannot_be_drawn_says_why(values):
    """No, one, few or constant runs: every picture exists, and those without a drawing give a reason."""
    seen = observed(values)
    asked = [autocorrelation_chart(seen), lag_chart(seen), quantile_chart(seen), batch_chart(seen, "host")]
    for picture in asked:
        assert picture.svg or "Not drawn: " in picture.finding
    assert run_chart(seen, "host").finding if len(values) else True


def test_extremes_are_kept_when_runs_are_binned():
    """One extreme run among 100,000 is in the drawing's bins and in the table."""
    values = noise(100_000)
    values[54_321] = 99.0
    bins = binned(np.arange(100_000.0), values, 240)
    assert bins.high.max() == 99.0
    assert bins.n.sum() == 100_000
    assert bins.mean @ bins.n / 100_000 == pytest.approx(values.mean())
    picture = run_chart(observed(values), "host")
    assert any(row[5].startswith("99") for row in picture.table.rows)
    assert len(picture.svg) < 200_000


def test_runs_set_aside_enter_no_mean():
    """A run set aside moves neither the cells' levels nor what is analysed."""
    values = np.concatenate([noise(100), [1000.0, 1000.0]])
    aside = np.arange(102) >= 100
    seen = observed(values, aside=aside)
    assert abs(seen.kept.mean()) < 1e-9
    assert "2 runs are set aside" in run_chart(seen, "host").finding


def test_many_levels_are_drawn_by_their_extremes_and_all_tabulated():
    """Of 40 hosts the 16 with the lowest and highest means are drawn; the table has them all."""
    names = tuple(f"h{k:02}" for k in range(40))
    values = noise(2000) + (np.arange(2000) % 40 == 7) * 5.0
    picture = batch_chart(observed(values, hosts=40, names=names), "host")
    assert "16 of 40 levels" in picture.caption
    assert ">h07<" in picture.svg
    assert len(picture.table.rows) == 40


@pytest.mark.parametrize("n", [20, 250, 3000])
def test_nineteen_of_twenty_normal_samples_stay_inside_the_envelope(n):
    """Simultaneous coverage 95 %, within four binomial standard errors and that of the simulation."""
    envelope = normal_envelope(n)
    rng = np.random.default_rng(7)
    inside = 0
    for _ in range(600):
        ordered = np.sort(rng.normal(3.0, 2.0, size=n))[envelope.ranks - 1]
        units = quartile_units(ordered, envelope.ranks, n)
        inside += bool(((units >= envelope.low) & (units <= envelope.high)).all())
    assert abs(inside / 600 - 0.95) < 4 * np.sqrt(0.95 * 0.05 * (1 / 600 + 1 / 4000))


def test_heavy_tails_leave_the_envelope():
    """Student's t with 3 degrees of freedom is told from a normal law at 1,000 runs."""
    heavy = quantile_chart(observed(np.random.default_rng(5).standard_t(3, size=1000)))
    assert "Both tails are heavier" in heavy.finding
    assert "no evidence against a normal law" in quantile_chart(observed(noise(1000))).finding


def test_the_evidence_names_the_stretch_in_which_it_arose():
    """The finding says between which places the mean reached its threshold, and the highest family."""
    path = EvidencePath(
        epoch=1, first=100, width=4, mean=[0.0, 1.0, 3.5, 9.0], families={"drift along host": [0, 1, 4, 10]},
        threshold_first=3.0, threshold_own=6.0,
    )  # fmt: skip
    picture = evidence_chart("energy", "response-1", [path], [])
    assert "between places 108 and 111" in picture.finding
    assert "drift along host" in picture.finding
    assert "Not drawn" in evidence_chart("energy", "response-1", [], []).finding


def test_words_and_numbers_as_they_are_shown():
    """Control characters show as escapes, long names are cut, numbers have three figures."""
    assert visible("a\x1b\u202eb") == "a\\x1b\\u202eb"
    assert short("x" * 50, 10) == "x" * 9 + "…"
    assert [figures(value) for value in (None, float("nan"), 1234.5, -0.01234, 12)] == [
        "–",
        "–",
        "1,234",
        "−0.0123",
        "12",
    ]
    assert listed([str(k) for k in range(10)], n_most=2) == "0, 1 and 8 more"
    assert listed([]) == "none"
