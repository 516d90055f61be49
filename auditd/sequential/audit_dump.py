"""The state of an audit as bytes, and back: versioned, deterministic, without pickle."""

from __future__ import annotations

from typing import Any

import msgspec
import numpy as np

from auditd.errors import BadInput
from auditd.sequential.alarm import Alarm
from auditd.sequential.options import Options
from auditd.sequential.scored_block import State

VERSION = 2
"""Raised whenever the state's meaning changes; an older state is replayed from the stored runs instead."""


class AuditDump(msgspec.Struct, kw_only=True):
    """What is kept of an audit beside the runs themselves.

    Values and scores of earlier runs are not in it: they are rebuilt from the stored runs, so that its size
    depends on levels and not on runs.
    """

    version: int = VERSION
    options: Options
    n_runs: int
    n_primed: int
    n_scored: int
    levels: dict[str, list[str]]
    latest: list[float]
    alarms: list[Alarm]
    parts: dict[str, State]


def dump_bytes(dump: AuditDump) -> bytes:
    """Serialise (msgpack; arrays as dtype-free little-endian float64 with their shape)."""
    return msgspec.msgpack.Encoder(enc_hook=_encode_array, order="sorted").encode(dump)


def dump_from(data: bytes) -> AuditDump:
    """Read what `dump_bytes` wrote; BadInput for anything else."""
    try:
        version = msgspec.msgpack.decode(data, type=_Version).version
        if version != VERSION:
            raise BadInput(
                f"this audit state has version {version}, this release reads {VERSION}: replay the runs"
            )
        return msgspec.msgpack.decode(
            data, type=AuditDump, dec_hook=lambda _kind, value: _decode_array(value)
        )
    except msgspec.MsgspecError as error:
        raise BadInput(f"these bytes are no audit state: {error}") from error


class _Version(msgspec.Struct):
    version: int


def _encode_array(value: Any) -> Any:  # msgspec's hook takes and gives whatever msgpack can hold
    if isinstance(value, np.ndarray):
        return [list(value.shape), np.ascontiguousarray(value, dtype="<f8").tobytes()]
    raise NotImplementedError(f"{type(value).__name__} cannot be kept in an audit state")


def _decode_array(value: Any) -> Any:  # as above
    shape, data = value
    return np.frombuffer(data, dtype="<f8").astype(np.float64).reshape(shape)
