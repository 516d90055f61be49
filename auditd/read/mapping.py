"""A raw record and the plan make a Run, or a Refusal that says what is missing."""

from __future__ import annotations

from auditd.plan import Plan
from auditd.read.raw import Raw
from auditd.records import Refusal, Run


class Mapper:
    """Turns raw records into runs as a plan says; its accessors are compiled once.

    Parameters
    ----------
    plan : Plan
        Keys of the plan are key names, or RFC 6901 pointers when they begin with `/`.
    """

    def __init__(self, plan: Plan) -> None:
        self._plan = plan

    def map(self, raw: Raw | Refusal, *, path: str, generation: int = 0) -> Run | Refusal:
        """Return the run that a record states, or why it is none; never raises.

        `path` is the path as stored. `generation` counts how often the file was replaced by another one
        under its name (rotation); it enters the id only where the plan states no `record.id`.
        """
        raise NotImplementedError
