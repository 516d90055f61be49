"""The page of a large campaign: its time, its size, and that extremes survive."""

import resource

import numpy as np
import pytest
from campaigns_made import lay_out, runaudit

N_RUNS = 100_000
CPU_MAX_S = 20.0
"""Level for 100,000 runs and 3 responses, in processor time, so that a busy machine does not decide."""
BYTES_MAX = 3_000_000
PLAN = """
[landing]
paths = ["results"]
match = ["*.csv"]
[record]
id = "id"
sequence = "seq"
[responses.energy]
at = "energy"
[responses.steps]
at = "steps"
[responses.heat]
at = "heat"
[factors]
scheme = "scheme"
[nuisance]
host = "host"
"""


@pytest.mark.slow
def test_a_hundred_thousand_runs_stay_readable_and_small(tmp_path):
    """100,000 runs and 3 responses: at most 20 s, less than 3 MB, and the one extreme run is in the page."""
    plan = lay_out(tmp_path, PLAN)
    rng = np.random.default_rng(11)
    values = rng.normal(size=(N_RUNS, 3))
    values[54_321, 0] = 77.0
    lines = [
        f"r{k},{k},{a!r},{b!r},{c!r},{'xy'[k % 2]},h{k % 7}" for k, (a, b, c) in enumerate(values.tolist())
    ]
    (tmp_path / "results" / "all.csv").write_text(
        "\n".join(["id,seq,energy,steps,heat,scheme,host", *lines, ""])
    )
    assert runaudit(plan, "gather").returncode == 0
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    assert runaudit(plan, "report", "-o", str(tmp_path / "report.html")).returncode == 0
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    page = (tmp_path / "report.html").read_text()
    assert after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime <= CPU_MAX_S
    assert len(page.encode()) < BYTES_MAX
    assert "<td>77</td>" in page
    assert "100,000 runs in 240 stretches" in page
