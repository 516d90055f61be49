"""The sending process: reads one posting from standard input, sends it, answers on standard output.

It runs apart from the daemon, so that its time limit is hard, its library's logs (which may hold parts of
the address) go nowhere, and what is switched off here is switched off for nobody else.
"""

from __future__ import annotations

import logging
import os
import sys
from typing import Any

import msgspec


class Posting(msgspec.Struct, frozen=True, kw_only=True):
    """What the sending process is given on its standard input: arguments and variables would be seen."""

    address: str
    title: str
    text: str


class Posted(msgspec.Struct, frozen=True, kw_only=True):
    """What the sending process answers; `why` holds no text of the address nor of the server."""

    sent: bool
    why: str = ""


class Witness:
    """What is known of a sending's failure without quoting anybody: status codes and kinds of error."""

    def __init__(self) -> None:
        self.why = "its form is unknown, or it refused"

    def note_status(self, status: int, protocol: str) -> None:
        """Note a server's answer."""
        moved = " (a redirect, which is not followed)" if protocol == "HTTP" and 300 <= status < 400 else ""
        self.why = f"{protocol} status {status}{moved}"

    def note_error(self, error: BaseException) -> None:
        """Note an error by its kind, and the system's own words for it."""
        deepest = error
        while deepest.__cause__ or deepest.__context__:
            deepest = deepest.__cause__ or deepest.__context__ or deepest
        said = os.strerror(deepest.errno) if isinstance(deepest, OSError) and deepest.errno else ""
        self.why = type(error).__name__ + (f" ({said})" if said and "Unknown" not in said else "")


def post(posting: Posting) -> Posted:
    """Send a posting through apprise: certificates verified, redirects not followed."""
    import apprise

    logging.disable(logging.CRITICAL)
    witness = Witness()
    watch_http(witness)
    watch_smtp(witness)
    target = apprise.Apprise.instantiate(posting.address, asset=_asset(apprise))
    if target is None:
        return Posted(sent=False, why="it is not an address that apprise knows")
    target.verify_certificate = True
    target.redirects = False
    sender = apprise.Apprise(asset=target.asset)
    sender.add(target)
    sent = sender.notify(body=posting.text, title=posting.title, body_format=apprise.NotifyFormat.TEXT)
    return Posted(sent=bool(sent), why="" if sent else witness.why)


def _asset(apprise: Any) -> Any:  # apprise has no types
    """Return apprise's settings; of those a release does not know yet, the class's own answer stands."""
    wanted = {
        "app_id": "auditd",
        "app_desc": "auditd",
        "async_mode": False,
        "interpret_emojis": False,
        "interpret_escapes": False,
        "http_redirects": False,
        "allow_templates": False,
        "secure_logging": True,
        "storage_mode": "memory",
    }
    known = {
        name: value
        for name, value in wanted.items()
        if hasattr(apprise.AppriseAsset, name)
        or hasattr(apprise.AppriseAsset, f"_AppriseAsset__{name}")
        or hasattr(apprise.AppriseAsset, f"_{name}")
    }
    return apprise.AppriseAsset(**known)


def watch_http(witness: Witness) -> None:
    """Switch redirects and unverified certificates off in requests, whatever a plugin or address asks."""
    import requests

    plain_send = requests.Session.send

    def send(session: Any, request: Any, **options: Any) -> Any:  # requests' own signature
        if not options.get("verify", True):
            options["verify"] = True
        options["allow_redirects"] = False
        try:
            response = plain_send(session, request, **options)
        except Exception as error:
            witness.note_error(error)
            raise
        witness.note_status(response.status_code, "HTTP")
        return response

    requests.Session.send = send  # type: ignore[method-assign,assignment]


def watch_smtp(witness: Witness) -> None:
    """Note a mail server's answers and the errors of reaching it."""
    import smtplib

    plain_connect, plain_reply = smtplib.SMTP.connect, smtplib.SMTP.getreply

    def connect(server: Any, *arguments: Any, **options: Any) -> Any:  # smtplib's own signature
        try:
            return plain_connect(server, *arguments, **options)
        except Exception as error:
            witness.note_error(error)
            raise

    def getreply(server: Any) -> Any:
        try:
            code, said = plain_reply(server)
        except Exception as error:
            witness.note_error(error)
            raise
        if code >= 400:
            witness.note_status(code, "SMTP")
        return code, said

    smtplib.SMTP.connect = connect  # type: ignore[method-assign,assignment]
    smtplib.SMTP.getreply = getreply  # type: ignore[method-assign,assignment]


def main() -> None:
    """Send what standard input says; never show a traceback, which may quote the address."""
    answer = os.dup(1)
    os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
    try:
        posting = msgspec.json.decode(sys.stdin.buffer.read(), type=Posting)
        posted = post(posting)
    except Exception as error:  # noqa: BLE001 - a library's errors are its own; the kind is told, the text is not
        posted = Posted(sent=False, why=type(error).__name__)
    os.write(answer, msgspec.json.encode(posted))


if __name__ == "__main__":
    main()
