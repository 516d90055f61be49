"""Which cells each block holds, where a block cannot hold them all."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from auditd.errors import BadInput


def chosen_cells(n_cells: int, size: int, n_blocks: int, rng: np.random.Generator) -> list[list[int]]:
    """Choose `size` different cells for each block, as evenly as is found step by step.

    A cell that ran least often comes first, among those the one that shared fewest blocks with the cells
    already in the block, among those one at random. With `size` equal to `n_cells` every block is complete.

    Raises
    ------
    BadInput : so few blocks that some cell would never run.
    """
    if size == n_cells:
        return [list(range(n_cells)) for _ in range(n_blocks)]
    if size * n_blocks < n_cells:
        raise BadInput(
            f"{n_blocks} blocks of {size} runs cannot hold {n_cells} cells; add replicates or hosts"
        )
    replications = np.zeros(n_cells, dtype=np.int64)
    concurrences = np.zeros((n_cells, n_cells), dtype=np.int64)
    return [_next_block(size, replications, concurrences, rng) for _ in range(n_blocks)]


def _next_block(
    size: int, replications: NDArray[np.int64], concurrences: NDArray[np.int64], rng: np.random.Generator
) -> list[int]:
    """Choose a block's cells and count them."""
    block: list[int] = []
    for _ in range(size):
        shared = concurrences[:, block].sum(axis=1)
        ranking = np.lexsort((rng.random(replications.size), shared, replications))
        cell = next(int(i) for i in ranking if int(i) not in block)
        concurrences[cell, block] += 1
        concurrences[block, cell] += 1
        block.append(cell)
    replications[block] += 1
    return block
