"""Nothing landed for longer than the plan allows."""

from __future__ import annotations

from datetime import UTC, datetime

from auditd.records import Finding


def silence_finding(
    *, last_landed: datetime, now: datetime, after_s: float, last_run: str | None, n: int
) -> Finding:
    """Return the finding that nothing landed for `after_s` seconds; it does not hold when something has.

    Parameters
    ----------
    last_landed, now : aware times; `last_landed` is the daemon's start when no run has landed yet.
    after_s : the plan's `silence.after`, in seconds.
    last_run : id of the run that landed last.
    n : runs landed so far.
    """
    silent_s = (now - last_landed).total_seconds()
    since = f"{last_landed.astimezone(UTC):%d %b %H:%M} UTC"
    last = f", when {last_run} landed" if last_run else ""
    message = (
        f"nothing has landed for {_told(silent_s)}, since {since}{last}; the plan allows {_told(after_s)}"
    )
    holds = silent_s >= after_s
    if not holds:
        message = f"runs land again, the last one {_told(max(0.0, silent_s))} ago"
    key = f"silence:{n}"  # one silence, one warning: the number of runs does not change while it lasts
    return Finding(key=key, kind="silence", message=message, run=last_run, n=n, holds=holds)


def _told(span_s: float) -> str:
    if span_s < 120:
        return f"{span_s:.0f} s"
    return f"{span_s / 60:.0f} min" if span_s < 7200 else f"{span_s / 3600:.1f} h"
