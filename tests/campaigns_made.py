"""Small campaigns on disk, made by seed, for tests that run the real command."""

import json
import os
import subprocess
import sys
from datetime import UTC, datetime, timedelta

import numpy as np

PLAN = """
[campaign]
title = "Lattice relaxation"
alarm_budget = 0.05

[landing]
paths = ["results"]
match = ["*.ndjson", "*.json"]
settle = "100ms"

[record]
id = "/id"
started = "/time/start"
finished = "/time/end"
seed = "/seed"
status = "/status"

[responses.energy]
at = "/out/energy"
margin = 0.2

[responses.steps]
at = "/out/steps"

[factors]
scheme = "/cfg/scheme"

[nuisance]
host = "/env/host"

[order]
by = "started"
patience = "30m"

[[comparisons]]
response = "energy"
between = [{scheme = "direct"}, {scheme = "staged"}]
"""


def records(n, *, seed=0, step_at=None, step=2.0, host="h2", failing=()):
    """Return n runs, 10 minutes apart, on four hosts; `step` is added on one host from a run on."""
    rng = np.random.default_rng(seed)
    began = datetime(2027, 3, 1, tzinfo=UTC)
    found = []
    for k in range(n):
        on = f"h{rng.integers(1, 5)}"
        started = began + timedelta(minutes=10 * k)
        energy = rng.normal() + (step if step_at is not None and k >= step_at and on == host else 0.0)
        found.append(
            {
                "id": f"r{k:05d}",
                "time": {
                    "start": started.isoformat(),
                    "end": (started + timedelta(minutes=float(rng.uniform(5, 9)))).isoformat(),
                },
                "seed": str(rng.integers(0, 2**62)),
                "status": "broken" if k in failing else "ok",
                "out": {"energy": energy, "steps": float(rng.lognormal())},
                "cfg": {"scheme": str(rng.choice(["direct", "staged"]))},
                "env": {"host": on},
            }
        )
    return found


def lay_out(folder, plan=PLAN):
    """Write the plan and an empty landing; return the plan's path."""
    (folder / "results").mkdir(parents=True)
    (folder / "plan.toml").write_text(plan)
    return folder / "plan.toml"


def append(folder, runs, name="runs.ndjson"):
    """Append runs to a growing file."""
    with (folder / "results" / name).open("a") as stream:
        stream.writelines(json.dumps(run) + "\n" for run in runs)


def runaudit(plan, *arguments, **options):
    """Run the command and return what it did."""
    return subprocess.run(
        [sys.executable, "-P", "-m", "auditd", "--plan", str(plan), *arguments],
        capture_output=True,
        text=True,
        check=False,
        env=os.environ | {"RUNAUDIT_KEY": "00ff", "RUNAUDIT_TRACE": "1"} | options.pop("env", {}),
        timeout=120,
        **options,
    )


def start_daemon(plan, log):
    """Start the daemon beside the test; the caller ends it."""
    return subprocess.Popen(
        [sys.executable, "-P", "-m", "auditd", "--plan", str(plan), "watch"],
        stdin=subprocess.DEVNULL,
        stdout=log,
        stderr=log,
        env=os.environ | {"RUNAUDIT_KEY": "00ff", "RUNAUDIT_TRACE": "1"},
    )
