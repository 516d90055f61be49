"""From letters to messages: a few go one by one, a burst goes as one that names its leading cause."""

from __future__ import annotations

import hashlib
from collections import Counter
from collections.abc import Sequence
from typing import Any

import msgspec

from auditd.alerts.shown import one_line
from auditd.records import GRADES
from auditd.store.outbox import Letter

N_SINGLE = 5
"""More letters than this for one target at one time are a burst, and go as one message."""
N_TITLE = 150
"""Characters of a title; mail readers and chat services cut longer ones."""


class Message(msgspec.Struct, frozen=True, kw_only=True):
    """What is sent for some letters: `document` as JSON for programs, `title` and `text` for people."""

    letters: tuple[Letter, ...]
    document: bytes
    title: str
    text: str


def messages_for(letters: Sequence[Letter]) -> tuple[Message, ...]:
    """Return the messages for one target's letters; those tried least often come first."""
    if len(letters) > N_SINGLE:
        return (_burst(letters),)
    return tuple(_single(letter) for letter in sorted(letters, key=lambda one: (one.n_tries, one.row)))


def leading(letters: Sequence[Letter]) -> Letter:
    """Return the letter that leads: of the highest grade, then the strongest evidence, then the oldest."""
    return min(letters, key=lambda one: (-_grade_rank(one.body), -_strength(one.body), one.row))


def _grade_rank(body: dict[str, Any]) -> int:
    return GRADES.index(body["grade"]) if body.get("grade") in GRADES else -1


def _strength(body: dict[str, Any]) -> float:
    log_e = body.get("log_e")
    return float(log_e) if isinstance(log_e, (int, float)) else 0.0


def _single(letter: Letter) -> Message:
    body = letter.body | {"alert_id": letter.alert_id}
    return Message(
        letters=(letter,),
        document=msgspec.json.encode(body),
        title=one_line(f"{_campaign(body)}: {_headline(body)}", N_TITLE),
        text="\n".join(_lines(body)),
    )


def _burst(letters: Sequence[Letter]) -> Message:
    lead = leading(letters)
    ids = sorted(letter.alert_id for letter in letters)
    alert_id = hashlib.blake2b("\n".join(ids).encode(), digest_size=16).hexdigest()
    kinds = Counter(str(letter.body.get("kind")) for letter in letters)
    burst = {
        "n_warnings": len(letters),
        "kinds": dict(kinds.most_common()),
        "warnings": [letter.body.get("id") for letter in letters],
        "alert_ids": ids,
    }
    body = lead.body | {"alert_id": alert_id, "burst": burst}
    title = f"{_campaign(body)}: {len(letters)} warnings, led by {_headline(body)}"
    counted = ", ".join(f"{n} {one_line(kind, 40)}" for kind, n in kinds.most_common())
    return Message(
        letters=tuple(letters),
        document=msgspec.json.encode(body),
        title=one_line(title, N_TITLE),
        text="\n".join([f"{len(letters)} warnings at once: {counted}. The leading one:", *_lines(body)]),
    )


def _campaign(body: dict[str, Any]) -> str:
    return str(body.get("campaign") or "Campaign")


def _headline(body: dict[str, Any]) -> str:
    parts = [str(body.get("id")), f"({body.get('grade')})", str(body.get("kind"))]
    if body.get("along"):
        level = "" if body.get("level") is None else f"={body['level']}"
        parts.append(f"along {body['along']}{level}")
    if body.get("response"):
        parts.append(f"in {body['response']}")
    return " ".join(parts)


def _lines(body: dict[str, Any]) -> list[str]:
    named = (("run", "run"), ("remedy", "remedy"), ("raised", "raised_at"), ("alert id", "alert_id"))
    lines = [one_line(str(body.get("message") or _headline(body)), 2000)]
    lines += [f"{name}: {one_line(str(body[key]), 2000)}" for name, key in named if body.get(key) is not None]
    return [*lines, f"More: runaudit show {one_line(str(body.get('id')), 40)}"]
