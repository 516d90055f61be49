"""Runs whose allocation depends on results: scored only within the stage in which they were committed."""

from __future__ import annotations

from collections.abc import Sized

from auditd.errors import BadInput
from auditd.sequential.run_block import labels


def cells_within_stages(cells: object, stages: object, *, drawn_at_random: bool = False) -> list[str]:
    """Give labels that take the place of cells when results steer what runs next.

    An optimiser keeps good cells and drops bad ones, so that the runs of a cell over the whole campaign are
    not exchangeable even when they are independent. Runs of one stage were committed together, before any of
    their results; within it the runs of a cell are exchangeable.

    Parameters
    ----------
    cells, stages : labels, one a run.
    drawn_at_random : the order of the stage's runs was drawn at random over all its cells, and hosts were
        given by that order alone. Then all runs of a stage are scored against each other, whatever their
        cells; differences between cells only blunt the scores.

    Returns
    -------
    labels for `replay(cells=…)` or `Auditor.advance`.

    Raises
    ------
    BadInput : labels of different lengths.
    """
    if isinstance(stages, str) or not isinstance(stages, Sized):
        raise BadInput(f"stages must be an array of labels, got {type(stages).__name__}")
    stage = labels(stages, "stages", len(stages))
    cell = labels(cells, "cells", len(stage))
    if drawn_at_random:
        return stage
    # Lengths first: no two pairs of labels give one text.
    return [f"{len(s)}:{s}|{c}" for s, c in zip(stage, cell, strict=True)]
