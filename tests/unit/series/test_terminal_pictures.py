"""Pictures in plain characters: 80 columns, ASCII, and what they show is where it happened."""

import pytest

from auditd.series.strip_line import NAME_WIDTH, shortened, strip_line
from auditd.series.strips import N_BINS
from auditd.series.terminal_evidence import evidence_lines


def test_a_strip_shows_where_a_response_lay_high_and_low():
    """A step shows as a change of signs at its place, and the extremes have signs of their own."""
    assert strip_line([-1.0] * 4 + [1.0] * 4) == "----++++"
    assert strip_line([-9.0, 0.0, 0.1, 0.0, 9.0]) == "_ooo^"


def test_a_constant_strip_is_flat():
    """Zeros and an empty strip need no scale."""
    assert strip_line([0.0] * 3) == "ooo"
    assert not strip_line([])


def test_a_strip_fits_into_80_columns():
    """Indent, name, space and all stretches take 80 columns at most, long names included."""
    line = f"  {shortened('x' * 64, NAME_WIDTH):<{NAME_WIDTH}} {strip_line([1.0] * N_BINS)}"
    assert len(line) <= 80
    assert line.isascii()


@pytest.mark.parametrize("n", [1, 60, 61, 256])
def test_evidence_rises_where_it_arose(n):
    """Columns are filled from where the e-value exceeds 1; the W stands under the run that raised it."""
    half = n // 2
    lines = evidence_lines(
        [-1.0] * half + [20.0] * (n - half), first=0, width=10, threshold=5.0, raised=10 * half
    )
    assert all(len(line) <= 80 and line.isascii() for line in lines)
    top, mark = lines[0], next(line for line in lines if line.endswith("W"))
    assert top.index("#") == mark.index("W")
    assert n == 1 or any("-" in line[14:] for line in lines[:-1])


def test_no_path_draws_nothing():
    """Without a scored run there is no chart."""
    assert evidence_lines([], first=0, width=1, threshold=3.0, raised=None) == []
