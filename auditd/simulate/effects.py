"""Faults on the latent scale: each takes the state of a campaign and returns the faulty one.

The latent errors of a campaign without faults are independent standard normal, so all sizes are in standard
deviations of a run's error. Effects are applied in the order in which they are given.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from auditd.errors import BadInput
from auditd.simulate.simulated import Floats, Layout, PlantedFault

DAY_S = 86400.0


@dataclass(frozen=True, kw_only=True)
class Latent:
    """A campaign before its law is applied: errors `z`, and everything that a fault may change."""

    layout: Layout
    z: Floats
    seeds: tuple[str, ...]
    parents: NDArray[np.int64]
    failed: NDArray[np.bool_]
    truth: tuple[PlantedFault, ...] = ()

    def with_fault(self, planted: PlantedFault, **changed: object) -> Latent:
        """Return the state with some fields changed and the fault noted."""
        return replace(self, truth=(*self.truth, planted), **changed)  # type: ignore[arg-type]


class Fault(Protocol):
    """What plants one fault."""

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Return the state with the fault in it."""
        ...


@dataclass(frozen=True, kw_only=True)
class Autoregressive:
    """AR(1) errors of unit variance with coefficient `phi`, along the order or within a nuisance's levels."""

    phi: float
    along: str = "order"

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Filter each level's errors in their order."""
        from scipy.signal import lfilter

        del rng
        if not -1 < self.phi < 1:
            raise BadInput(f"phi is {self.phi}; a coefficient between -1 and 1 is expected")
        labels, z = state.layout.along(self.along), state.z.copy()
        gain = np.sqrt(1 - self.phi**2)
        for level in np.unique(labels):
            own = labels == level
            start = [(1 - gain) * z[own][0]]  # the first value is stationary
            z[own], _ = lfilter([gain], [1.0, -self.phi], z[own], zi=start)
        return state.with_fault(PlantedFault(kind="serial", along=self.along, size=self.phi), z=z)


@dataclass(frozen=True, kw_only=True)
class BatchEffects:
    """A normal effect a level of a nuisance with intraclass correlation `icc`; the variance stays one."""

    icc: float
    along: str = "host"

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Draw an effect for each level and add it."""
        if not 0 <= self.icc < 1:
            raise BadInput(f"icc is {self.icc}; a share from 0 to below 1 is expected")
        levels, codes = np.unique(state.layout.along(self.along), return_inverse=True)
        shifts = rng.standard_normal(levels.size)
        z = np.sqrt(1 - self.icc) * state.z + np.sqrt(self.icc) * shifts[codes]
        return state.with_fault(PlantedFault(kind="batch", along=self.along, size=self.icc), z=z)


@dataclass(frozen=True, kw_only=True)
class LevelShift:
    """One level of a nuisance lies higher by `size`, in all its runs."""

    size: float
    along: str
    level: str

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Shift the runs of the level."""
        del rng
        own = _runs_of(state.layout, self.along, self.level, 0)
        planted = PlantedFault(
            kind="batch", along=self.along, level=self.level, index=int(np.argmax(own)), size=self.size
        )
        return state.with_fault(planted, z=state.z + self.size * own)


@dataclass(frozen=True, kw_only=True)
class StepShift:
    """From run `at` on, all runs (or those of one level) lie higher by `size`."""

    at: int
    size: float
    along: str = "order"
    level: str | None = None

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Shift the later runs."""
        del rng
        own = _runs_of(state.layout, self.along, self.level, self.at)
        return state.with_fault(_drift_of(self, own), z=state.z + self.size * own)


@dataclass(frozen=True, kw_only=True)
class Drift:
    """From run `at` on, all runs (or those of one level) rise in a straight line by `size` until the last."""

    at: int
    size: float
    along: str = "order"
    level: str | None = None

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Add the line."""
        del rng
        n = state.layout.n
        own = _runs_of(state.layout, self.along, self.level, self.at)
        line = np.clip((np.arange(n) - self.at) / max(n - 1 - self.at, 1), 0, 1)
        return state.with_fault(_drift_of(self, own), z=state.z + self.size * line * own)


@dataclass(frozen=True, kw_only=True)
class DailyCycle:
    """A sine of the time of day with the given amplitude."""

    amplitude: float
    period_s: float = DAY_S

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Add the sine, at a random phase."""
        phase = rng.uniform(0, 2 * np.pi)
        wave = self.amplitude * np.sin(2 * np.pi * state.layout.times / self.period_s + phase)
        return state.with_fault(
            PlantedFault(kind="clock", along="order", size=self.amplitude), z=state.z + wave
        )


@dataclass(frozen=True, kw_only=True)
class SpreadJump:
    """From run `at` on, errors are `ratio` times as wide."""

    at: int
    ratio: float

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Stretch the later errors."""
        del rng
        z = np.where(np.arange(state.layout.n) >= self.at, self.ratio, 1.0) * state.z
        return state.with_fault(
            PlantedFault(kind="spread", along="order", index=self.at, size=self.ratio), z=z
        )


@dataclass(frozen=True, kw_only=True)
class SeedBlocks:
    """Common random numbers: the j-th runs of all cells on a host share a seed and a part of their error."""

    correlation: float
    within: str = "host"

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Share seeds and errors within the blocks; this is a design, so no fault is noted."""
        blocks = block_numbers(state.layout, self.within)
        shared = rng.standard_normal(int(blocks.max()) + 1)
        z = np.sqrt(1 - self.correlation) * state.z + np.sqrt(self.correlation) * shared[blocks]
        first = {int(block): seed for block, seed in zip(blocks[::-1], state.seeds[::-1], strict=True)}
        return replace(state, z=z, seeds=tuple(first[int(block)] for block in blocks))


@dataclass(frozen=True, kw_only=True)
class RestartLineage:
    """A share of the runs restarts from an earlier run of its cell and inherits `phi` of its error."""

    share: float
    phi: float

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Choose parents among the cell's earlier runs, and hand their errors down in order."""
        z, parents, seen = state.z.copy(), state.parents.copy(), dict[str, list[int]]()
        chosen = rng.random(state.layout.n) < self.share
        gain = np.sqrt(1 - self.phi**2)
        for i, cell in enumerate(state.layout.cells.tolist()):
            earlier = seen.setdefault(cell, [])
            if chosen[i] and earlier:
                parents[i] = earlier[rng.integers(len(earlier))]
                z[i] = self.phi * z[parents[i]] + gain * z[i]
            earlier.append(i)
        first = int(np.argmax(parents >= 0)) if bool(np.any(parents >= 0)) else 0
        return state.with_fault(
            PlantedFault(kind="lineage", index=first, size=self.phi), z=z, parents=parents
        )


@dataclass(frozen=True, kw_only=True)
class Failures:
    """Between two runs, a run fails with the given probability; its result is lost."""

    at: int
    until: int
    probability: float

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Let runs of the stretch fail."""
        number = np.arange(state.layout.n)
        inside = (number >= self.at) & (number < self.until)
        failed = state.failed | (inside & (rng.random(state.layout.n) < self.probability))
        return state.with_fault(
            PlantedFault(kind="failure", along="order", index=self.at, size=self.probability), failed=failed
        )


@dataclass(frozen=True, kw_only=True)
class IgnoredSeed:
    """One cell ignores its seed: every run of it gives the result of its first."""

    cell: str

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Copy the first run's error into all runs of the cell."""
        del rng
        own = np.flatnonzero(state.layout.cells == self.cell)
        if own.size == 0:
            raise BadInput(f"no run of cell {self.cell!r}; known: {', '.join(np.unique(state.layout.cells))}")
        z = state.z.copy()
        z[own] = z[own[0]]
        planted = PlantedFault(
            kind="repeat", along="cell", level=self.cell, index=int(own[0]), size=float(own.size)
        )
        return state.with_fault(planted, z=z)


@dataclass(frozen=True, kw_only=True)
class CachedResults:
    """Runs that give, to the last digit, the result of an earlier run of their cell."""

    pairs: tuple[tuple[int, int], ...]
    along: str | None = None
    level: str | None = None

    def __call__(self, state: Latent, rng: np.random.Generator) -> Latent:
        """Copy each pair's first error over its second."""
        del rng
        z = state.z.copy()
        for first, second in self.pairs:
            if state.layout.cells[first] != state.layout.cells[second]:
                raise BadInput(
                    f"runs {first} and {second} are of different cells; a cache repeats within one"
                )
            z[second] = z[first]
        index = min(second for _, second in self.pairs)
        planted = PlantedFault(
            kind="repeat", along=self.along, level=self.level, index=index, size=float(len(self.pairs))
        )
        return state.with_fault(planted, z=z)


def block_numbers(layout: Layout, within: str) -> NDArray[np.int64]:
    """Number the blocks: the j-th run of every cell at one level of a nuisance form one block."""
    levels = layout.along(within).tolist()
    counts: dict[tuple[str, str], int] = {}
    numbers: dict[tuple[str, int], int] = {}
    out = np.empty(layout.n, dtype=np.int64)
    for i, key in enumerate(zip(levels, layout.cells.tolist(), strict=True)):
        counts[key] = counts.get(key, 0) + 1
        out[i] = numbers.setdefault((key[0], counts[key]), len(numbers))
    return out


def _runs_of(layout: Layout, along: str, level: str | None, at: int) -> NDArray[np.bool_]:
    own = np.arange(layout.n) >= at
    if level is not None:
        own &= layout.along(along) == level
    if not bool(np.any(own)):
        raise BadInput(f"no run of {along}={level} at or after run {at}; the layout has {layout.n} runs")
    return own


def _drift_of(effect: StepShift | Drift, own: NDArray[np.bool_]) -> PlantedFault:
    return PlantedFault(
        kind="drift", along=effect.along, level=effect.level, index=int(np.argmax(own)), size=effect.size
    )
