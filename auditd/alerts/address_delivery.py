"""Telling an address: a short-lived process of its own sends, so that nothing of it stays or leaks here."""

from __future__ import annotations

import os
import sys
import threading
from collections.abc import Mapping
from pathlib import Path

import msgspec

from auditd.alerts.address import read_address
from auditd.alerts.attempt import DELIVERED, STOPPED, Attempt, failed
from auditd.alerts.child import run_child
from auditd.alerts.command import clean_environment
from auditd.alerts.message import Message
from auditd.alerts.posting import Posted, Posting
from auditd.errors import PlanError
from auditd.plan import Alert

ADDRESS_TIMEOUT_S = 60.0
"""A sending that has not ended by then is ended; a server may answer slowly, byte by byte, for ever."""
_KEPT = (
    *("PATH", "HOME", "LANG", "TZ"),
    *("HTTPS_PROXY", "HTTP_PROXY", "NO_PROXY", "https_proxy", "http_proxy", "no_proxy"),
    *("SSL_CERT_FILE", "SSL_CERT_DIR", "REQUESTS_CA_BUNDLE"),
)


def tell_address(
    alert: Alert,
    message: Message,
    *,
    folder: Path,
    stop: threading.Event,
    environ: Mapping[str, str] = os.environ,
    timeout_s: float = ADDRESS_TIMEOUT_S,
) -> Attempt:
    """Send a message to an alert's address."""
    try:
        address = read_address(alert, folder, environ)
    except PlanError as error:
        return failed(str(error))
    posting = Posting(address=address, title=message.title, text=message.text)
    try:
        ended = run_child(
            [sys.executable, "-I", "-m", "auditd.alerts.posting"],
            given=msgspec.json.encode(posting),
            environ=clean_environment(environ, _KEPT),
            folder=folder,
            timeout_s=timeout_s,
            stop=stop,
            merge_errors=False,
        )
    except OSError as error:
        return failed(f"the sending process cannot be started: {error.strerror}")
    if ended.how == "stop":
        return STOPPED
    if ended.how == "limit":
        return failed(f"the address had not taken the message after {timeout_s:g} s")
    try:
        posted = msgspec.json.decode(ended.output, type=Posted)
    except msgspec.DecodeError:
        return failed(f"the sending process ended with {ended.code} and without an answer")
    return DELIVERED if posted.sent else failed(f"the address did not take the message: {posted.why}")
