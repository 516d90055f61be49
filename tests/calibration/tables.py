"""Make the complete calibration tables: `python tests/calibration/tables.py sequential`.

Writes tests/calibration/tables/<name>.md, which is committed; seeds are fixed.
"""

import pathlib
import sys
import time

import numpy as np
from daemon_campaigns import DAEMON_NULLS, WITHHELD, audited
from scipy import stats
from sequential_scenarios import ALTERNATIVES, BLIND_SPOTS, NULLS, Scenario, campaign, step

from auditd.sequential import replay

FOLDER = pathlib.Path(__file__).parent / "tables"
N_NULL, N_ALTERNATIVE, N_DAEMON = 2000, 400, 200
SEED = 20_26


def interval(hits, n):
    """Clopper–Pearson limits of a share."""
    low = stats.beta.ppf(0.025, hits, n - hits + 1) if hits else 0.0
    high = stats.beta.ppf(0.975, hits + 1, n - hits) if hits < n else 1.0
    return low, high


def first_alarms(scenario, n_campaigns, seed):
    """All alarms of each seeded campaign."""
    return [replay(**campaign(scenario, [seed, number])).alarms for number in range(n_campaigns)]


def null_rows(n_campaigns):
    for scenario in NULLS:
        hits = sum(bool(alarms) for alarms in first_alarms(scenario, n_campaigns, SEED))
        low, high = interval(hits, n_campaigns)
        share = f"{hits / n_campaigns:.4f} | {low:.4f}–{high:.4f}"
        yield f"| {scenario.name} | {n_campaigns} | {share} | ≤ 0.05 |"


def daemon_rows(n_campaigns):
    for scenario in (*DAEMON_NULLS, WITHHELD):
        hits = sum(bool(audited(scenario, [SEED + 2, number])[0]) for number in range(n_campaigns))
        low, high = interval(hits, n_campaigns)
        share = f"{hits / n_campaigns:.4f} | {low:.4f}–{high:.4f}"
        yield f"| {scenario.name} | {n_campaigns} | {share} | ≤ 0.05 |"


def blind_rows(n_campaigns):
    for scenario in BLIND_SPOTS:
        first = [alarms[0] if alarms else None for alarms in first_alarms(scenario, n_campaigns, SEED + 3)]
        median = np.median([np.inf if alarm is None else alarm.index for alarm in first])
        names = [" ".join(alarm.key) for alarm in first if alarm is not None]
        named = max(set(names), key=names.count) if len(names) >= n_campaigns / 10 else "–"
        run = f"{median:.0f}" if np.isfinite(median) else "–"
        yield f"| {scenario.name} | {len(names) / n_campaigns:.3f} | {run} | {named} |"


def remembered(n_campaigns):
    """Mean score by distance from a step of 0.5 sd, over campaigns."""
    scenario = Scenario(name="remembered", make=step(0.5), n_runs=2000)
    scores = np.mean([replay(**campaign(scenario, [SEED + 4, k])).scores for k in range(n_campaigns)], axis=0)
    return [f"| {at}–{at + 99} | {scores[300 + at : 400 + at].mean():.2f} |" for at in (0, 200, 600, 1500)]


def summary(scenario, found):
    """What the table says of an alternative."""
    alarmed = [alarms for alarms in found if alarms]
    index = [alarms[0].index if alarms else np.inf for alarms in found]
    first = [alarms[0] for alarms in alarmed]
    covered = [a.since_low <= scenario.start <= a.since_high for a in first if a.index >= scenario.start]
    clock = [min((a.index for a in alarms if a.kind == "clock"), default=np.inf) for alarms in found]
    return {
        "alarmed": len(alarmed) / len(found),
        "median": float(np.median(index)),
        "lead": np.mean([a.key in scenario.planted for a in first]),
        "host": np.mean([a.level == "0" for a in first if a.key in scenario.planted] or [np.nan]),
        "covered": np.mean(covered or [np.nan]),
        "width": float(np.median([a.since_high - a.since_low for a in first])),
        "clock": float(np.mean(np.array(clock) <= 4 * 218)),
        "leaders": np.mean([sum(a.lead and a.replaces is None for a in alarms) for alarms in alarmed]),
    }


def alternative_rows(n_campaigns):
    for scenario in ALTERNATIVES:
        n = n_campaigns if scenario.n_runs <= 1000 else n_campaigns // 4
        got = summary(scenario, first_alarms(scenario, n, SEED + 1))
        host = f"{got['host']:.3f} (≥ {scenario.host_level})" if scenario.host_level else ""
        lead = f"{got['lead']:.3f}" + (f" (≥ {scenario.lead_level})" if scenario.lead_level else "")
        clock = f"{got['clock']:.3f}" if scenario.clock_level else ""
        yield (
            f"| {scenario.name} | {n} | {got['alarmed']:.3f} | {got['median']:.0f} | {scenario.median_level} "
            f"| {lead} | {host} | {got['covered']:.3f} | {got['width']:.0f} | {got['leaders']:.2f} "
            f"| {clock} |"
        )


def sequential(n_null=N_NULL, n_alternative=N_ALTERNATIVE, n_daemon=N_DAEMON):
    """The table of the sequential audit."""
    began = time.process_time()
    lines = [
        "# Calibration of the sequential audit",
        "",
        "Made by `python tests/calibration/tables.py sequential`; seeds are fixed. 1,000 runs, 4 cells in",
        "complete blocks of random order, 4 hosts at random, 218 runs a day, times given (K = 7), budget",
        "0.05, where not said otherwise.",
        "",
        "## Exchangeable runs: share of campaigns with any alarm",
        "",
        "| runs | campaigns | share | 95 % interval | level |",
        "|---|---|---|---|---|",
        *null_rows(n_null),
        "",
        "## Independent runs by the daemon's path: share of campaigns with any alarm",
        "",
        "1,000 runs or so, entered by start with automatic patience, three nuisances (host, build, hour),",
        "three responses (one of the plan, duration and completed); durations are heavy-tailed, 3 % of runs",
        "fail. Halving and optimiser are steered by results, and declare it. `no stages`: nothing is asked,",
        "and that is said.",
        "",
        "| runs | campaigns | share | 95 % interval | level |",
        "|---|---|---|---|---|",
        *daemon_rows(n_daemon),
        "",
        "## Planted dependence",
        "",
        "`median`: run of the first alarm. `lead`: the leading kind is the planted one, of alarms. `host`:",
        "the right host is named, of alarms led rightly. `date`: the set of starts not excluded covers the",
        "true one, of first alarms at or after it, and its median width in runs. `warnings`: leaders a",
        "campaign with any alarm (one cause was planted). `clock`: `clock` has taken over by the end of the",
        "fourth day.",
        "",
        "| planted | campaigns | alarmed | median | level | lead | host | date | width | warnings | clock |",
        "|---|---|---|---|---|---|---|---|---|---|---|",
        *alternative_rows(n_alternative),
        "",
        "## Blind spots",
        "",
        f"{n_alternative // 2} campaigns each; `share`: with any alarm by the last run, 1,000; `named`: the",
        "most frequent leader.",
        "",
        "| dependence | share | median run | named |",
        "|---|---|---|---|",
        *blind_rows(n_alternative // 2),
        "",
        "Mean score after a step of 0.5 sd at run 300 (an endless reference would give 0.5):",
        "",
        "| runs after the step | mean score |",
        "|---|---|",
        *remembered(n_alternative // 4),
        "",
    ]
    FOLDER.mkdir(exist_ok=True)
    (FOLDER / "sequential.md").write_text("\n".join(lines), encoding="utf-8")
    print(f"{FOLDER / 'sequential.md'} after {time.process_time() - began:.0f} s of CPU")


if __name__ == "__main__":
    TABLES = {"sequential": sequential}
    if len(sys.argv) < 2 or sys.argv[1] not in TABLES:
        sys.exit(f"which table? one of {', '.join(TABLES)}")
    TABLES[sys.argv[1]](*map(int, sys.argv[2:]))
