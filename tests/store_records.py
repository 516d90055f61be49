"""Records with as little as a store needs, for the tests of the store."""

import hashlib
from datetime import UTC, datetime, timedelta

import msgspec

from auditd.records import Caution, Finding, Run

START = datetime(2031, 5, 1, tzinfo=UTC)


def make_run(number, **changed):
    """Run `r<number>`; its digest follows its content unless one is stated."""
    values = {
        "id": f"r{number}",
        "path": "landing/all.ndjson",
        "offset": 100 * number,
        "number": number,
        "cell": {"solver": ("implicit", "explicit")[number % 2]},
        "nuisance": {"host": f"n{number % 3}"},
        "responses": {"error": number / 7},
        "metadata": {"note": "x"},
        "started": START + timedelta(minutes=number),
        "finished": START + timedelta(minutes=number + 5),
    } | changed
    content = msgspec.json.encode({name: repr(value) for name, value in values.items()})
    return Run(**({"digest": hashlib.blake2b(content, digest_size=16).digest()} | values))


def make_caution(key="drift:host:n3", **changed):
    """A standing warning of a finding under a key."""
    finding = Finding(
        key=key, kind="drift", message="host n3 drifts", along="host", level="n3", index=12, n=13
    )
    values = {
        "id": "",
        "finding": finding,
        "grade": "material",
        "state": "standing",
        "raised_at": START,
        "evidence_loss": 0.4,
        "remedy": "make 12 runs again",
    }
    return Caution(**(values | changed))
