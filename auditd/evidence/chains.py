"""Which run follows which: the links along which one run's error may carry over into the next."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Codes, Floats, Ints


@dataclass(frozen=True, kw_only=True)
class Chains:
    """Links child ← parent; a run without a parent starts a chain. `along` names the order."""

    along: str
    child: Ints
    parent: Ints
    starts: Ints

    def innovations(self, x: Floats, phi: float) -> Floats:
        """X less φ times the parent's; a start is scaled by √(1 − φ²), so that all have one variance."""
        e = x.copy()
        e[self.child] -= phi * x[self.parent]
        e[self.starts] *= np.sqrt(1 - phi * phi)
        return e


@dataclass(frozen=True, kw_only=True)
class Stretches(Chains):
    """Chains without branches: `runs` holds them one after the other, each beginning at its `offsets`."""

    runs: Ints
    offsets: Ints

    @property
    def mean_runs(self) -> float:
        """Mean length of a chain, in runs."""
        return len(self.runs) / max(len(self.offsets), 1)

    def longest(self, n_chains: int, n_least: int) -> list[Ints]:
        """Runs of each of the longest chains that have at least n_least runs."""
        ends = np.append(self.offsets[1:], len(self.runs))
        length = ends - self.offsets
        order = np.argsort(-length, kind="stable")[:n_chains]
        return [self.runs[self.offsets[i] : ends[i]] for i in order if length[i] >= n_least]


def along_order(n: int) -> Stretches:
    """The order of the audit as one chain of n runs."""
    index = np.arange(n, dtype=np.int64)
    return Stretches(
        along="order", child=index[1:], parent=index[:-1], starts=index[:1], runs=index, offsets=index[:1]
    )


def unlinked(n: int) -> Stretches:
    """No run follows another: the order of n runs is not known."""
    index = np.arange(n, dtype=np.int64)
    return Stretches(
        along="nothing", child=index[:0], parent=index[:0], starts=index, runs=index, offsets=index
    )


def within(codes: Codes, name: str) -> Stretches:
    """One chain for each level of a nuisance, in the order of the audit."""
    order = np.argsort(codes.codes, kind="stable")
    new = np.concatenate(([True], codes.codes[order[1:]] != codes.codes[order[:-1]]))
    same = ~new[1:]
    return Stretches(
        along=name,
        child=order[1:][same],
        parent=order[:-1][same],
        starts=order[new],
        runs=order,
        offsets=np.flatnonzero(new),
    )
