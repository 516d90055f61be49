"""What a check of the full audit is."""

from __future__ import annotations

from typing import ClassVar, Literal, Protocol

from auditd.checks.answer import Answer, Family
from auditd.checks.view import View

Unit = Literal["share", "response"]
"""What an effect is counted in: a correlation or share of variance, or the response's audited scale."""


class Check(Protocol):
    """One question, asked of a view.

    `name` is the statistic's name, `family` what it is adjusted with, `n_min` the runs that it needs,
    `needs_order` whether it rests on the order of the runs. An effect whose whole interval lies within
    ± `tiny` is said to be tiny: as it stands for a `unit` of shares; times the runs' own standard deviation,
    or the plan's margin where there is one, for one on the response's scale.
    """

    name: ClassVar[str]
    family: ClassVar[Family]
    null: ClassVar[str]
    assumes: ClassVar[str]
    source: ClassVar[str]
    n_min: ClassVar[int]
    needs_order: ClassVar[bool]
    tiny: ClassVar[float]
    unit: ClassVar[Unit]

    def ask(self, view: View) -> Answer:
        """Return the answer; raises NotTestable where the view has too little."""
        ...
