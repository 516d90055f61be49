"""The audit of one response over one epoch, run by run or in blocks."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput
from auditd.sequential.advance import Advanced, EarlierRuns
from auditd.sequential.alarm import Alarm, Crossing, Key, crossings
from auditd.sequential.alarm_report import describe
from auditd.sequential.audit_dump import AuditDump, dump_bytes, dump_from
from auditd.sequential.book import Book
from auditd.sequential.history import N_RUNS_A_PART
from auditd.sequential.naming import choose_leader, shift_evidence
from auditd.sequential.options import Options
from auditd.sequential.run_block import RunBlock, run_block
from auditd.sequential.scored_series import ScoredSeries
from auditd.sequential.scorer import Scorer, Scores
from auditd.sequential.wealth import log_sum

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

N_RUNS_AT_ONCE = N_RUNS_A_PART
"""Runs bet on at once: the arrays of a grid stay within a core's cache."""


class Auditor:
    """Audits one response, continuing from its state.

    Null hypothesis: given labels and order, the joint law of the response is unchanged by permuting runs
    within cells. Alternative: any of the families' dependences, from any run on. Under the null the
    probability of any alarm, at whatever moments anyone looks, is at most `alarm_budget` (Ville 1939).

    Assumptions: order, labels and times do not depend on the responses (otherwise the rate can rise without
    bound: see `stages`); `pooled` and `formula` assume Gaussian errors of one variance, or a random order of
    cells, and alarm too often where spreads differ and the order of cells is not random.
    """

    def __init__(self, options: Options) -> None:
        options.check()
        self.options = options
        self._book = Book(options)
        self._scorer = Scorer(options)
        self._series = ScoredSeries(options)
        self._n_primed = 0
        self._latest = np.zeros(len(self.keys))
        self._alarms: list[Alarm] = []

    @property
    def keys(self) -> tuple[Key, ...]:
        """The families, as (kind, along)."""
        return self._book.keys

    @property
    def n_asked(self) -> int:
        """K: e-processes that share the budget, over all responses."""
        return self.options.n_asked or len(self.keys) * self.options.n_responses

    @property
    def n_runs(self) -> int:
        """Runs taken, also those not scored."""
        return self._series.n_runs

    @property
    def n_scored(self) -> int:
        """Runs scored."""
        return self._series.n_scored

    @property
    def alarms(self) -> tuple[Alarm, ...]:
        """All alarms of the epoch so far."""
        return tuple(self._alarms)

    @property
    def log_e(self) -> dict[Key, float]:
        """Log e-value of each family after the last run."""
        return dict(zip(self.keys, self._latest.tolist(), strict=True))

    @property
    def threshold_first(self) -> float:
        """Log of what the mean of all e-processes must reach for the first alarm."""
        return float(-np.log(self.options.alarm_budget))

    @property
    def threshold_own(self) -> float:
        """Log of what a family's own e-process must reach for a further alarm."""
        return float(np.log(self.n_asked / self.options.alarm_budget))

    def advance(
        self,
        values: npt.ArrayLike,
        cells: object,
        *,
        ids: object,
        nuisance: Mapping[str, object] | None = None,
        times: object = None,
        parents: object = None,
        design: object = None,
    ) -> Advanced:
        """Take the next runs, in order; any split of a series into blocks gives the same result.

        Parameters are those of `replay`, with `parents` counted from the epoch's first run.
        """
        block = self._checked(
            run_block(
                values,
                cells,
                ids=ids,
                nuisance=nuisance or {},
                times=times,
                parents=parents,
                design=design,
            )
        )
        first = self._series.n_runs
        scores = self._scorer.score(block)
        parts, alarms = [], []
        for begin in range(0, scores.z.size, N_RUNS_AT_ONCE):
            part = slice(begin, min(begin + N_RUNS_AT_ONCE, scores.z.size))
            log_e, raised = self._advance_part(block, scores, part)
            parts.append(log_e)
            alarms += raised
        paths = np.concatenate(parts, axis=1) if parts else np.empty((len(self.keys), 0))
        return Advanced(
            first=first,
            scores=scores.z,
            log_e=dict(zip(self.keys, paths, strict=True)),
            log_mean=self._log_mean(paths),
            alarms=tuple(alarms),
        )

    def observe(
        self,
        value: float,
        cell: str,
        *,
        run_id: str,
        nuisance: Mapping[str, str] | None = None,
        time: float | None = None,
        parent: int | None = None,
        design: npt.ArrayLike | None = None,
    ) -> Advanced:
        """Take one run; the same as `advance` over a block of one."""
        return self.advance(
            np.array([value], dtype=np.float64),
            [cell],
            ids=[run_id],
            nuisance={name: [level] for name, level in (nuisance or {}).items()},
            times=np.array([np.nan if time is None else time]) if self.options.has_times else None,
            parents=np.array([-1 if parent is None else parent]) if self.options.has_parents else None,
            design=None if design is None else np.asarray(design, dtype=np.float64)[None, :],
        )

    def dump(self) -> bytes:
        """Give the state as bytes; with the epoch's stored runs, `load` continues from it."""
        return dump_bytes(
            AuditDump(
                options=self.options,
                n_runs=self._series.n_runs,
                n_primed=self._n_primed,
                n_scored=self._series.n_scored,
                levels=self._levels_seen(),
                latest=self._latest.tolist(),
                alarms=self._alarms,
                parts=self._book.state(),
            )
        )

    @classmethod
    def load(cls, data: bytes, runs: EarlierRuns | None = None) -> Auditor:
        """Continue from a state given by `dump`.

        Parameters
        ----------
        data : what `dump` gave.
        runs : all runs of the epoch that the state covers, in order; from them the reference of the ranks and
            the scores are rebuilt. None only for a state before the first run.

        Raises
        ------
        BadInput : other bytes, another version, or runs that are not those covered.
        """
        dump = dump_from(data)
        auditor = cls(dump.options)
        n_given = 0 if runs is None else np.asarray(runs.values).size
        if n_given != dump.n_runs:
            raise BadInput(f"the state covers {dump.n_runs} runs, got {n_given}")
        if runs is not None and n_given:
            auditor._rebuild(runs, dump.n_primed)
        if auditor.n_scored != dump.n_scored or auditor._levels_seen() != dump.levels:
            raise BadInput("these runs are not the ones that the state covers: scored runs or levels differ")
        auditor._latest = np.array(dump.latest)
        auditor._alarms = list(dump.alarms)
        auditor._book.restore(dump.parts)
        return auditor

    @classmethod
    def primed(cls, options: Options, runs: EarlierRuns) -> Auditor:
        """Open an audit that bets from the next run on, with earlier runs as reference only.

        For an epoch that follows an absorbed effect: earlier values are given as corrected by it, the wealth
        starts afresh and no cell has to warm up again. Indices go on counting from the first of `runs`.
        Values of runs that shall not be a reference are given as NaN.
        """
        auditor = cls(options)
        auditor._rebuild(runs, n_primed=np.asarray(runs.values).size)
        return auditor

    def _levels_seen(self) -> dict[str, list[str]]:
        return {name: list(codes) for name, codes in self._series.levels.items()}

    def _rebuild(self, runs: EarlierRuns, n_primed: int) -> None:
        """Rebuild reference, scores and labels from stored runs, without betting."""
        block = self._checked(
            run_block(
                runs.values,
                runs.cells,
                ids=runs.ids,
                nuisance=runs.nuisance,
                times=runs.times,
                parents=runs.parents,
                design=runs.design,
            )
        )
        scores = self._scorer.score(block)
        if n_primed:
            self._series.take(block, scores, slice(0, n_primed))
            self._series.forget_scored()
        self._series.take(block, scores, slice(n_primed, block.values.size))
        self._n_primed = n_primed

    def _checked(self, block: RunBlock) -> RunBlock:
        options = self.options
        if set(block.nuisance) != set(options.nuisances):
            raise BadInput(f"nuisance must name {sorted(options.nuisances)}, got {sorted(block.nuisance)}")
        for name, wanted, given in (
            ("times", options.has_times, block.times),
            ("parents", options.has_parents, block.parents),
            ("design", options.baseline == "formula", block.design),
        ):
            if wanted and given is None:
                raise BadInput(f"{name} must be given: the audit was opened with them")
        return block

    def _log_mean(self, paths: FloatArray) -> FloatArray:
        mean: FloatArray = log_sum(paths) - np.log(self.n_asked)
        return mean

    def _advance_part(self, block: RunBlock, scores: Scores, part: slice) -> tuple[FloatArray, list[Alarm]]:
        """Bet on one part of a block and raise its alarms."""
        at, scored = self._series.take(block, scores, part)
        paths = np.repeat(self._latest[:, None], part.stop - part.start, axis=1)
        if at.size == 0:
            return paths, []
        scored_paths = self._book.advance(scored)
        # A run that is not scored repeats what stood before it.
        latest = np.searchsorted(at, np.arange(paths.shape[1]), side="right") - 1
        paths[:, latest >= 0] = scored_paths[:, latest[latest >= 0]]
        before, self._latest = self.log_e, scored_paths[:, -1].copy()
        found = crossings(
            dict(zip(self.keys, scored_paths, strict=True)),
            self._log_mean(scored_paths),
            before=before,
            threshold_first=self.threshold_first,
            threshold_own=self.threshold_own,
            raised=frozenset(alarm.key for alarm in self._alarms),
            leader_at=lambda at: self._leader(scored_paths, at),
        )
        raised = [self._raise(crossing, scored_paths) for crossing in found]
        return paths, [alarm for alarm in raised if alarm is not None]

    def _leader(self, paths: FloatArray, at: int) -> Key:
        n_scored = self._series.n_scored - paths.shape[1] + at + 1
        log_e = dict(zip(self.keys, paths[:, at].tolist(), strict=True))
        return choose_leader(log_e, self._book.shared(at), shift_evidence(self._series, n_scored))

    def _raise(self, crossing: Crossing, paths: FloatArray) -> Alarm | None:
        if any(alarm.key == crossing.key for alarm in self._alarms):
            return None
        n_scored = self._series.n_scored - paths.shape[1] + crossing.at + 1
        alarm = describe(
            crossing,
            log_e=dict(zip(self.keys, paths[:, crossing.at].tolist(), strict=True)),
            log_mean=float(self._log_mean(paths[:, crossing.at : crossing.at + 1])[0]),
            book=self._book,
            series=self._series,
            n_scored=n_scored,
            standing=self._alarms,
        )
        if alarm is not None:
            self._alarms.append(alarm)
        return alarm
