"""Nuisances whose levels look different: their means are taken off before time is asked."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Codes, Floats, Ints
from auditd.evidence.levels import LevelEffects, effects

SUSPECT = 0.05  # p below which level means are taken off before time is asked


@dataclass(frozen=True, kw_only=True)
class Suspects:
    """Level effects, strongest first, and what is left of the residuals.

    rest : (n,) residuals less the suspicious levels' means. level : (n,) code of the cell and of all levels
        taken off. n_spent : means of cells and levels taken off; they add up, where codes would multiply.
    """

    found: tuple[LevelEffects, ...]
    rest: Floats
    level: Ints
    n_spent: int
    remarks: tuple[str, ...]


def suspect(residual: Floats, cell: Ints, n_cells: int, nuisances: Mapping[str, Codes]) -> Suspects:
    """Take off the means of one nuisance after the other, while levels differ with p < 0.05."""
    found: list[LevelEffects] = []
    remarks: list[str] = []
    level, rest, waiting, n_spent = cell, residual, dict(nuisances), n_cells
    while waiting:
        known = []
        for name in list(waiting):
            one = effects(name, rest, waiting[name], cell, n_cells, n_spent - n_cells)
            if one is None:
                del waiting[name]
                remarks.append(
                    f"{name}: each cell ran on one level, or each level once; what levels cost cannot be told"
                )
            else:
                known.append(one)
        if not known:
            break
        strongest = min(known, key=lambda e: (e.pvalue(1.0), -e.between / max(e.within, 1e-300)))
        if strongest.pvalue(1.0) >= SUSPECT:
            found += known
            break
        found.append(strongest)
        rest = rest - strongest.means[strongest.level_of]
        n_spent += len(strongest.means) - n_cells
        level = np.unique(level * len(strongest.means) + strongest.level_of, return_inverse=True)[1]
        del waiting[strongest.name]
    return Suspects(found=tuple(found), rest=rest, level=level, n_spent=n_spent, remarks=tuple(remarks))
