"""A schedule as `schedule --format json` and `--format csv` write it."""

from __future__ import annotations

import csv
import io
from typing import Any

from auditd.records import level_label
from auditd.schedule.randomised_blocks import Schedule


def schedule_document(schedule: Schedule) -> dict[str, Any]:  # Any: a JSON document
    """Return the schedule as one JSON document; a schedule without hosts has null there."""
    return {
        "schema": 1,
        "entropy": schedule.entropy,
        "blocks": schedule.blocks,
        "efficiency": schedule.efficiency,
        "runs": [
            {
                "sequence": run.sequence,
                "block": run.block,
                "host": run.host,
                "cell": dict(run.cell),
                "seed": run.seed,
            }
            for run in schedule.runs
        ],
    }


def schedule_csv(schedule: Schedule) -> str:
    """Return the schedule as a table (RFC 4180): sequence, block, host, a column a factor, seed."""
    factors = list(schedule.runs[0].cell) if schedule.runs else []
    text = io.StringIO(newline="")
    writer = csv.writer(text)
    writer.writerow(["sequence", "block", "host", *factors, "seed"])
    for run in schedule.runs:
        levels = [level_label(run.cell[name]) for name in factors]
        writer.writerow([run.sequence, run.block, run.host or "", *levels, run.seed])
    return text.getvalue()
