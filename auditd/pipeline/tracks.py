"""One response's audit: its auditor, its path of evidence, and alarms at positions of the campaign."""

from __future__ import annotations

import logging
from dataclasses import dataclass

import msgspec
import numpy as np

from auditd.errors import BadInput
from auditd.pipeline.evidence_paths import PathRecorder
from auditd.sequential import Alarm, Auditor, EarlierRuns, Options
from auditd.store.states import Checkpoint

log = logging.getLogger("auditd")


@dataclass(frozen=True, kw_only=True)
class Raised:
    """An alarm, with its indices as positions of the campaign."""

    response: str
    part: str
    epoch: int
    alarm: Alarm
    index: int
    since: int
    since_low: int
    since_high: int


class _Saved(msgspec.Struct, frozen=True):
    """A track's state: the auditor's own, and the path of evidence so far."""

    audit: bytes
    width: int
    n_runs: int
    names: tuple[str, ...]
    highest: bytes


class Track:
    """One series that is audited: a response, or a part of it.

    Parameters
    ----------
    response, part : what is audited; `part` is empty for the response itself.
    options : the audit's options.
    """

    def __init__(self, response: str, part: str, options: Options) -> None:
        self.response = response
        self.part = part
        self.auditor = Auditor(options)
        self.recorder = PathRecorder()

    @property
    def name(self) -> str:
        """The name under which the state is saved."""
        return f"audit:{self.response}:{self.part}"

    @property
    def title(self) -> str:
        """The name that is shown."""
        return f"{self.response} ({self.part})" if self.part else self.response

    def advance(self, runs: EarlierRuns, epoch: int, first_position: int) -> list[Raised]:
        """Audit the next runs; index 0 of the auditor is at `first_position`."""
        options = self.auditor.options
        advanced = self.auditor.advance(
            runs.values,
            runs.cells,
            ids=runs.ids,
            nuisance=runs.nuisance,
            times=runs.times if options.has_times else None,
            parents=runs.parents if options.has_parents else None,
            design=runs.design,
        )
        self.recorder.take(advanced)
        return [self.raised(alarm, epoch, first_position) for alarm in advanced.alarms]

    def raised(self, alarm: Alarm, epoch: int, first_position: int) -> Raised:
        """Return an alarm with its indices as positions."""
        return Raised(
            response=self.response,
            part=self.part,
            epoch=epoch,
            alarm=alarm,
            index=first_position + alarm.index,
            since=first_position + alarm.since,
            since_low=first_position + alarm.since_low,
            since_high=first_position + alarm.since_high,
        )

    def prime(self, runs: EarlierRuns) -> None:
        """Rank the runs to come among earlier ones, without betting on these."""
        self.auditor = Auditor.primed(self.auditor.options, runs)

    def checkpoint(self, epoch: int, first_position: int) -> Checkpoint:
        """Return the state, with the position up to which it covers the runs."""
        recorder = self.recorder
        saved = _Saved(
            audit=self.auditor.dump(),
            width=recorder.width,
            n_runs=recorder.n_runs,
            names=recorder.names,
            highest=recorder.highest.astype(np.float64).tobytes(),
        )
        return Checkpoint(
            epoch=epoch, position=first_position + self.auditor.n_runs, body=msgspec.msgpack.encode(saved)
        )

    def resume(self, checkpoint: Checkpoint, runs: EarlierRuns) -> bool:
        """Continue from a saved state; False where it is not of these runs or this release."""
        try:
            saved = msgspec.msgpack.decode(checkpoint.body, type=_Saved)
            auditor = Auditor.load(saved.audit, runs)
        except (msgspec.DecodeError, BadInput) as error:
            log.warning(
                "the saved state of %s is not used: %s; its runs are audited again", self.title, error
            )
            return False
        if auditor.options != self.auditor.options:
            return False
        self.auditor = auditor
        self.recorder.restore(saved.width, saved.n_runs, saved.names, saved.highest)
        return True
