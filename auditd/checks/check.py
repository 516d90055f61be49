"""What a check of the full audit is."""

from __future__ import annotations

from typing import ClassVar, Protocol

from auditd.checks.answer import Answer, Family
from auditd.checks.view import View


class Check(Protocol):
    """One question, asked of a view.

    `name` is the statistic's name, `family` what it is adjusted with, `n_min` the runs that it needs.
    """

    name: ClassVar[str]
    family: ClassVar[Family]
    null: ClassVar[str]
    assumes: ClassVar[str]
    source: ClassVar[str]
    n_min: ClassVar[int]

    def ask(self, view: View) -> Answer:
        """Return the answer; raises NotTestable where the view has too little."""
        ...
