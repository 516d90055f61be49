"""What a simulated campaign holds: its arrays, its circumstances, and the truth that was planted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from auditd.errors import BadInput

Floats: TypeAlias = NDArray[np.float64]
Labels: TypeAlias = NDArray[np.str_]


@dataclass(frozen=True, kw_only=True)
class PlantedFault:
    """One fault as it was planted.

    Attributes
    ----------
    kind : the kind of warning that names it, as in `auditd.records.Kind`.
    along : `order`, a nuisance's name, or None.
    level : the level that it concerns, or None where it concerns all.
    index : the first run that it touches, counted from 0.
    size : its strength; the unit is the effect's (see `auditd.simulate.effects`).
    """

    kind: str
    along: str | None = None
    level: str | None = None
    index: int = 0
    size: float = 0.0


@dataclass(frozen=True, kw_only=True)
class Layout:
    """Which cell ran where and when, in audit order; without results.

    Attributes
    ----------
    cells : labels, shape (n,).
    nuisance : labels by the nuisance's name, each of shape (n,).
    times : starts in POSIX seconds, shape (n,), not decreasing.
    """

    cells: Labels
    nuisance: Mapping[str, Labels]
    times: Floats

    def __post_init__(self) -> None:
        n = self.cells.shape[0]
        for name, labels in self.nuisance.items():
            if labels.shape != (n,):
                raise BadInput(
                    f"nuisance {name} has shape {labels.shape}; ({n},) is expected as for the cells"
                )
        if self.times.shape != (n,) or bool(np.any(np.diff(self.times) < 0)):
            raise BadInput("times must be one a run and must not decrease; sort the runs by their start")

    @property
    def n(self) -> int:
        """The number of runs."""
        return int(self.cells.shape[0])

    def along(self, name: str) -> Labels:
        """Labels along which an order is followed: one label for `order`, else the nuisance's levels."""
        if name == "order":
            return np.full(self.n, "", dtype=np.str_)
        if name not in self.nuisance:
            raise BadInput(
                f"{name!r} is no nuisance of this layout; known: {', '.join(self.nuisance) or 'none'}"
            )
        return self.nuisance[name]


@dataclass(frozen=True, kw_only=True)
class Simulated:
    """A campaign with known truth, in audit order.

    Attributes
    ----------
    values : one response, shape (n,); NaN where the run failed.
    cells, nuisance, times : as in `Layout`.
    seeds : 128-bit whole numbers as text.
    parents : the index of the run that a run was restarted from, or -1; shape (n,).
    ids : `r0001` and so on.
    completed : whether the run did, shape (n,).
    cell_means : the expected value of each cell, without faults.
    truth : what was planted; empty for exchangeable runs.
    """

    values: Floats
    cells: Labels
    nuisance: Mapping[str, Labels]
    times: Floats
    seeds: tuple[str, ...]
    parents: NDArray[np.int64]
    ids: tuple[str, ...]
    completed: NDArray[np.bool_]
    cell_means: Mapping[str, float]
    truth: tuple[PlantedFault, ...] = ()

    def arguments(self) -> dict[str, Any]:  # Any: the keyword arguments of `auditd.sequential.replay`
        """Keyword arguments for `auditd.sequential.replay`; parents are left out where no run has one."""
        kept: dict[str, Any] = {
            "values": self.values,
            "cells": self.cells,
            "nuisance": self.nuisance,
            "times": self.times,
            "ids": self.ids,
        }
        if bool(np.any(self.parents >= 0)):
            kept["parents"] = self.parents
        return kept
