"""A seeded campaign: a layout, a law, and faults, put together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from auditd.errors import BadInput
from auditd.simulate.effects import Fault, Latent
from auditd.simulate.laws import law_named
from auditd.simulate.simulated import Layout, Simulated

N_SEED_WORDS = 4
"""Words of 32 bits in a seed: 128 bits, as NumPy's entropy."""


def simulate(
    layout: Layout,
    rng: np.random.Generator,
    *,
    law: str = "normal",
    effects: Sequence[Fault] = (),
    cell_means: Mapping[str, float] | None = None,
) -> Simulated:
    """Simulate one response of a campaign with known truth.

    Parameters
    ----------
    layout : which cell ran where and when.
    rng : the only source of randomness.
    law : a name of `auditd.simulate.laws.LAWS`.
    effects : faults, applied in this order on the latent scale (standard normal).
    cell_means : the cells' own levels, on the scale of the values; 0 where not stated.

    Raises
    ------
    BadInput : an unknown law, or an effect that does not fit the layout.
    """
    state = Latent(
        layout=layout,
        z=rng.standard_normal(layout.n),
        seeds=drawn_seeds(layout.n, rng),
        parents=np.full(layout.n, -1, dtype=np.int64),
        failed=np.zeros(layout.n, dtype=np.bool_),
    )
    for effect in effects:
        state = effect(state, rng)
    names, codes = np.unique(layout.cells, return_inverse=True)
    means = {str(name): float((cell_means or {}).get(str(name), 0.0)) for name in names}
    values = law_named(law)(state.z, codes) + np.asarray(list(means.values()))[codes]
    return Simulated(
        values=np.where(state.failed, np.nan, values),
        cells=layout.cells,
        nuisance=layout.nuisance,
        times=layout.times,
        seeds=state.seeds,
        parents=state.parents,
        ids=run_ids(layout.n),
        completed=~state.failed,
        cell_means=means,
        truth=state.truth,
    )


def drawn_seeds(n: int, rng: np.random.Generator) -> tuple[str, ...]:
    """Draw `n` seeds of 128 bits, as text."""
    words = rng.integers(0, 2**32, size=(n, N_SEED_WORDS), dtype=np.uint64).tolist()
    return tuple(str((a << 96) | (b << 64) | (c << 32) | d) for a, b, c, d in words)


def run_ids(n: int, prefix: str = "r") -> tuple[str, ...]:
    """Return ids `r0001`, `r0002` … in audit order."""
    if n < 0:
        raise BadInput(f"{n} runs; a count is expected")
    return tuple(f"{prefix}{number:04d}" for number in range(1, n + 1))
