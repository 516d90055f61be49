"""The invented campaign as files: lines, arrays and a table, a host each in its own way."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Mapping, Sequence
from typing import Any

from auditd.simulate.sample_campaign import RESPONSES, SampleCampaign
from auditd.simulate.sample_timetable import HOSTS

ARRAY_HOST, TABLE_HOST = "plover", "teal"
"""One host writes a JSON array a slice, one a single CSV table; the others append lines of JSON."""
SLICE_S = 9 * 3600.0
"""The array's host closes a file every 9 hours, counted from the campaign's first start."""

Records = Sequence[Mapping[str, Any]]  # Any: JSON values


def sample_results(campaign: SampleCampaign) -> dict[str, bytes]:
    """Return the content of each result file by its path below `results/`; runs stand as they finished."""
    files: dict[str, bytes] = {}
    as_finished = sorted(range(len(campaign.records)), key=lambda i: float(campaign.finished[i]))
    for host in HOSTS:
        own = [i for i in as_finished if campaign.records[i]["host"] == host]
        rows = [campaign.records[i] for i in own]
        if host == TABLE_HOST:
            files[f"{host}.csv"] = as_table(rows)
        elif host == ARRAY_HOST:
            slices = [slice_number(float(campaign.finished[i]), campaign_origin(campaign)) for i in own]
            files |= _arrays_by_slice(host, rows, slices)
        else:
            files[f"{host}.ndjson"] = as_lines(rows)
    return files


def campaign_origin(campaign: SampleCampaign) -> float:
    """Return when the first run started, in POSIX seconds, as it is written."""
    from datetime import datetime

    return datetime.fromisoformat(campaign.records[0]["started"]).timestamp()


def slice_number(finished_s: float, origin_s: float) -> int:
    """Number the slice of the campaign in which a run finished, from 0."""
    return int((finished_s - origin_s) // SLICE_S)


def as_lines(rows: Records) -> bytes:
    """One JSON object a line."""
    return "".join(json.dumps(row, separators=(",", ":")) + "\n" for row in rows).encode()


def as_table(rows: Records) -> bytes:
    """A CSV table with a header, RFC 4180's line ends, and nothing where a failed run has no response."""
    text = io.StringIO(newline="")
    plain = [name for name in rows[0] if name not in RESPONSES]
    writer = csv.DictWriter(text, fieldnames=[*plain, *RESPONSES], restval="")
    writer.writeheader()
    writer.writerows(rows)
    return text.getvalue().encode()


def _arrays_by_slice(host: str, rows: Records, slices: Sequence[int]) -> dict[str, bytes]:
    grouped: dict[int, list[Mapping[str, Any]]] = {}
    for row, number in zip(rows, slices, strict=True):
        grouped.setdefault(number, []).append(row)
    return {
        f"{host}/slice-{number:03d}.json": (json.dumps(group, indent=1) + "\n").encode()
        for number, group in grouped.items()
    }
