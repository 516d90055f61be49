"""Allocation by outcome and seed blocks: what is scored against what."""

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.sequential import cells_within_stages, seed_blocks


def test_cells_within_stages_keep_different_pairs_apart():
    """No two pairs of stage and cell share a label; with a random order the stage alone decides."""
    cells, stages = ["a|b", "b", "a|b"], ["1", "1|a", "1"]
    assert len(set(cells_within_stages(cells, stages))) == 2
    assert cells_within_stages(cells, stages, drawn_at_random=True) == stages
    with pytest.raises(BadInput):
        cells_within_stages(cells, stages[:2])


def test_seed_blocks_are_complete_blocks_in_order_of_completion():
    """Means and Helmert contrasts by hand; incomplete blocks and lost values wait."""
    found = seed_blocks(
        [1.0, 3.0, 2.0, 8.0, np.nan, 5.0], ["a", "b", "b", "a", "a", "b"], ["1", "1", "2", "2", "3", "3"]
    )
    assert found.mean.tolist() == [2.0, 5.0]
    assert found.mean_index.tolist() == [1, 3]
    assert found.contrast.tolist() == [2.0, -6.0]
    assert found.contrast_index.tolist() == [1, 2]
    assert found.contrast_cells == ["b", "b"]
    with pytest.raises(BadInput):
        seed_blocks([1.0, 2.0], ["a", "a"], ["1", "2"])
