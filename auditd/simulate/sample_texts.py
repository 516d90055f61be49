"""The texts beside the sample's results: plans, the machine-readable list of faults, and the README."""

from __future__ import annotations

import json
from dataclasses import asdict

from auditd.simulate.sample_campaign import SAMPLE_SEED, SampleCampaign
from auditd.simulate.sample_timetable import HOSTS

PLAN = """\
[campaign]
title = "{title}"
alarm_budget = 0.05
confidence = 0.95
horizon = {horizon}

[landing]
paths = ["results"]
match = ["*.ndjson", "*.json", "*.csv"]
settle = "{settle}"

[record]
id = "run"
started = "started"
finished = "finished"
seed = "seed"
status = "status"
completed = ["ok"]

[responses.peak_tension]
at = "peak_tension"
unit = "kN"

[responses.offset]
at = "offset"
margin = 0.1
unit = "m"

[responses.fatigue]
at = "fatigue"
scale = "log"
margin = 0.1

[factors]
anchor = "anchor"
mesh = "mesh"

[nuisance]
host = "host"
build = "build"

[machines]
exclusive = ["host"]

[order]
by = "started"
patience = "12h"                 # one host lands its runs in files of 9 hours

[schedule]
replicates = 48
hosts = [{hosts}]
levels = {{anchor = ["single", "twin"], mesh = ["coarse", "middle", "fine"]}}

[[comparisons]]
response = "fatigue"
between = [{{anchor = "single"}}, {{anchor = "twin"}}]

[[comparisons]]
response = "fatigue"
between = [{{mesh = "coarse"}}, {{mesh = "middle"}}]

[[comparisons]]
response = "offset"
between = [{{mesh = "middle"}}, {{mesh = "fine"}}]
"""
TITLES = {"faulty": "Kelp raft mooring study", "clean": "Kelp raft mooring study, clean twin"}
SETTLE = "100ms"
"""Short, since the demo lands weeks within a minute."""

README = """\
# Sample logs

An invented campaign, so that `runaudit demo`, the tests and a reader have something to look at: the mooring
of kelp rafts in random seas, simulated with one or two anchors (`anchor`) on three meshes (`mesh`), on five
hosts, with three responses (`peak_tension` in kN, `offset` in m, `fatigue` without unit). Nothing here was
measured.

- `faulty/`: {n_faulty} runs with six planted faults.
- `clean/`: {n_clean} runs of the same study in which nothing is wrong: hosts run every cell in randomised
  complete blocks, the build changes without effect, and {n_clean_failed} runs failed, here and there, as some
  always do.
- `planted.json`: the faults for programs. `index` counts the runs from 0 in order of start, `run` is the id
  of the first run touched, `seen_from` the first index at which the fault can be seen at all. A
  warning names the fault rightly if it is of one of `kinds`, agrees with `along`, `level` and `response`
  where they are stated, and its message has the text `says`.

Each edition has its `plan.toml` and its `results/`. Three hosts append lines of JSON (`gull`, `heron`,
`ibis`), `plover` lands a JSON array every 9 hours, and `teal` appends to one CSV table. Runs stand in a file
as they finished.

## What was planted

| fault | from run | index | what |
|---|---|---|---|
{faults}

The drift is in `peak_tension` and the build's shift in `offset`, so that each can be named by itself;
`fatigue` has neither. The ignored seed and the cache repeat all three responses.

## Making them again

    python -m auditd.simulate.sample_logs sample_logs

The files follow from the seed {seed}; a test compares them with what the command makes.
"""


def plan_text(campaign: SampleCampaign) -> str:
    """Return the plan of an edition."""
    return PLAN.format(
        title=TITLES[campaign.edition],
        horizon=len(campaign.records),
        settle=SETTLE,
        hosts=", ".join(f'"{host}"' for host in HOSTS),
    )


def planted_text(faulty: SampleCampaign, clean: SampleCampaign) -> str:
    """Return `planted.json`."""
    document = {
        "schema": 1,
        "seed": SAMPLE_SEED,
        "faulty": {"runs": len(faulty.records), "faults": [asdict(fault) for fault in faulty.faults]},
        "clean": {"runs": len(clean.records), "faults": []},
    }
    return json.dumps(document, indent=1) + "\n"


def sample_readme(faulty: SampleCampaign, clean: SampleCampaign) -> str:
    """Return the README of the sample."""
    faults = "\n".join(f"| {f.name} | `{f.run}` | {f.index} | {f.what} |" for f in faulty.faults)
    return README.format(
        n_faulty=len(faulty.records),
        n_clean=len(clean.records),
        n_clean_failed=sum(record["status"] != "ok" for record in clean.records),
        faults=faults,
        seed=SAMPLE_SEED,
    )
