"""The records of the invented campaign of `sample_logs/`; everything follows from `SAMPLE_SEED`."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from auditd.simulate.campaign import drawn_seeds, simulate
from auditd.simulate.sample_faults import (
    SampleFault,
    failing_runs,
    own_effects,
    planted_faults,
    sample_run_id,
    shared_effects,
)
from auditd.simulate.sample_timetable import Edition, Timetable, sample_timetable
from auditd.simulate.simulated import Floats

SAMPLE_SEED = 20_260_307


@dataclass(frozen=True, kw_only=True)
class SampleResponse:
    """How a response is made from its errors, in the response's unit, and how many decimals are written."""

    level: float
    spread: float
    anchor_effect: float
    mesh_effect: float
    decimals: int
    logarithmic: bool = False


RESPONSES: Mapping[str, SampleResponse] = {
    "peak_tension": SampleResponse(level=42.0, spread=3.0, anchor_effect=-6.0, mesh_effect=1.5, decimals=6),
    "offset": SampleResponse(level=2.4, spread=0.25, anchor_effect=-0.4, mesh_effect=0.1, decimals=7),
    "fatigue": SampleResponse(
        level=-7.0, spread=0.35, anchor_effect=-0.5, mesh_effect=0.1, decimals=10, logarithmic=True
    ),
}


@dataclass(frozen=True, kw_only=True)
class SampleCampaign:
    """One edition: its records in order of start, when they finished (POSIX seconds), and its faults."""

    edition: Edition
    records: tuple[dict[str, Any], ...]  # Any: JSON values
    finished: Floats
    faults: tuple[SampleFault, ...]


def sample_campaign(edition: Edition) -> SampleCampaign:
    """Make one edition, always the same."""
    rng = np.random.default_rng([SAMPLE_SEED, int(edition == "faulty")])
    timetable = sample_timetable(edition, rng)
    layout = timetable.layout
    shared = shared_effects(layout) if edition == "faulty" else []
    series = {}
    for name, response in RESPONSES.items():
        own = own_effects(name, layout) if edition == "faulty" else []
        series[name] = _in_units(simulate(layout, rng, effects=[*own, *shared]).values, response, timetable)
    failed = failing_runs(edition, layout, rng)
    records = _sample_records(timetable, series, failed, drawn_seeds(layout.n, rng))
    faults = planted_faults(layout, failed) if edition == "faulty" else ()
    return SampleCampaign(edition=edition, records=records, finished=timetable.finished, faults=faults)


def time_text(posix_s: float) -> str:
    """Return a time as RFC 3339 in UTC with milliseconds."""
    text = datetime.fromtimestamp(posix_s, UTC).isoformat(timespec="milliseconds")
    return text.replace("+00:00", "Z")


def _in_units(z: Floats, response: SampleResponse, timetable: Timetable) -> Floats:
    """Errors to values, with the factors' effects, rounded to the decimals that are written."""
    fineness = np.select([timetable.meshes == "middle", timetable.meshes == "fine"], [1.0, 2.0], 0.0)
    twin = np.where(timetable.anchors == "twin", 1.0, 0.0)
    mean = response.level + response.anchor_effect * twin + response.mesh_effect * fineness
    values = mean + response.spread * z
    return np.asarray(np.round(np.exp(values) if response.logarithmic else values, response.decimals))


def _sample_records(
    timetable: Timetable, series: Mapping[str, Floats], failed: NDArray[np.bool_], seeds: tuple[str, ...]
) -> tuple[dict[str, Any], ...]:
    """What each run wrote; a failed run wrote no response."""
    layout = timetable.layout
    rows: list[dict[str, Any]] = []
    for i in range(layout.n):
        row: dict[str, Any] = {
            "run": sample_run_id(i),
            "started": time_text(float(layout.times[i])),
            "finished": time_text(float(timetable.finished[i])),
            "host": str(layout.nuisance["host"][i]),
            "build": str(layout.nuisance["build"][i]),
            "anchor": str(timetable.anchors[i]),
            "mesh": str(timetable.meshes[i]),
            "seed": seeds[i],
            "status": "failed" if failed[i] else "ok",
        }
        if not failed[i]:
            row |= {name: float(values[i]) for name, values in series.items()}
        rows.append(row)
    return tuple(rows)
