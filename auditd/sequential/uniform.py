"""Randomisers in (0, 1) that depend on a run's name and a key, never on data."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput

N_MANTISSA_BITS = 53
"""Bits of a float64's mantissa (IEEE 754-2019, table 3.5)."""

MAX_KEY_BYTES = 64
"""Longest key of BLAKE2b (RFC 7693, section 2.1)."""


def uniforms(ids: Iterable[str], *, response: str, key: bytes) -> npt.NDArray[np.float64]:
    """Give each run its randomiser U from a keyed BLAKE2b hash of (response, run id).

    Parameters
    ----------
    ids : run ids, text.
    response : name of the response; two responses of a run get unrelated randomisers.
    key : up to 64 bytes, drawn when the epoch opens.

    Returns
    -------
    U in the open interval (0, 1), float64, one a run: an odd multiple of 2^-53.

    Raises
    ------
    BadInput : the key is no bytes or longer than 64 bytes.

    References
    ----------
    RFC 7693 (2015), The BLAKE2 Cryptographic Hash. Vovk, Gammerman & Shafer (2005), Algorithmic Learning
    in a Random World, section 2.2: smoothed conformal predictors.
    """
    if not isinstance(key, bytes | bytearray) or len(key) > MAX_KEY_BYTES:
        raise BadInput(
            f"key must be at most {MAX_KEY_BYTES} bytes, got {key!r:.80}; draw it with os.urandom(32)"
        )
    name = response.encode("utf-8", "surrogatepass")
    start = hashlib.blake2b(len(name).to_bytes(8, "big") + name, digest_size=8, key=bytes(key)).copy
    digests = []
    for run in ids:
        digest = start()
        digest.update(run.encode("utf-8", "surrogatepass"))
        digests.append(digest.digest())
    bits = np.frombuffer(b"".join(digests), dtype=">u8").astype(np.uint64)
    top = (bits >> np.uint64(64 - (N_MANTISSA_BITS - 1))).astype(np.float64)
    return (top + 0.5) * 2.0 ** -(N_MANTISSA_BITS - 1)
