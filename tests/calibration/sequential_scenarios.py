"""Seeded campaigns with known truth for the calibration of the sequential audit."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

RUNS_PER_DAY = 218
N_CELLS, N_HOSTS, N_RUNS = 4, 4, 1000
CHANGE_AT = 300


@dataclass(frozen=True, kw_only=True)
class Scenario:
    """A row of the table: how values arise, and what the level asks."""

    name: str
    make: Callable  # (rng, cell, host, time) -> values
    n_runs: int = N_RUNS
    n_cells: int = N_CELLS
    n_hosts: int = N_HOSTS
    baseline: str = "cells"
    planted: frozenset = field(default_factory=frozenset)  # (kind, along) that name the cause rightly
    median_level: int | None = None  # run by which half of the campaigns have alarmed
    lead_level: float | None = None
    host_level: float | None = None
    start: int | None = None  # run at which the dependence begins
    clock_level: bool = False


def order_of_cells(rng, n_runs, n_cells):
    """Complete blocks, each in an order of its own."""
    blocks = -(-n_runs // n_cells)
    return np.concatenate([rng.permutation(n_cells) for _ in range(blocks)])[:n_runs]


def ar1(rng, n, phi):
    """Stationary AR(1) of unit variance."""
    from scipy.signal import lfilter

    noise = rng.normal(size=n) * np.sqrt(1 - phi**2)
    start = rng.normal()
    return lfilter([1.0], [1.0, -phi], noise, zi=[phi * start])[0]


def normal(rng, cell, host, time):
    return rng.normal(size=cell.size)


def student(rng, cell, host, time):
    return rng.standard_t(2.2, size=cell.size)


def lognormal(rng, cell, host, time):
    return rng.lognormal(size=cell.size)


def unequal_spreads(rng, cell, host, time):
    return rng.normal(size=cell.size) * 2.0 ** (cell % 4)


def rounded(rng, cell, host, time):
    return np.round(rng.normal(size=cell.size) * 2) / 2


def serial(phi):
    return lambda rng, cell, host, time: ar1(rng, cell.size, phi)


def serial_within_hosts(phi):
    def make(rng, cell, host, time):
        y = np.empty(cell.size)
        for level in np.unique(host):
            y[host == level] = ar1(rng, int((host == level).sum()), phi)
        return y

    return make


def batch(icc):
    def make(rng, cell, host, time):
        effect = rng.normal(size=host.max() + 1) * np.sqrt(icc)
        return effect[host] + rng.normal(size=cell.size) * np.sqrt(1 - icc)

    return make


def step(size, at=CHANGE_AT):
    return lambda rng, cell, host, time: rng.normal(size=cell.size) + size * (np.arange(cell.size) >= at)


def host_step(size, at=CHANGE_AT):
    """Host 0 steps."""
    return lambda rng, cell, host, time: (
        rng.normal(size=cell.size) + size * ((np.arange(cell.size) >= at) & (host == 0))
    )


def daily(amplitude):
    def make(rng, cell, host, time):
        phase = rng.uniform(0, 2 * np.pi)
        return rng.normal(size=cell.size) + amplitude * np.sin(2 * np.pi * time / 86_400 + phase)

    return make


def spread(ratio, at=CHANGE_AT):
    return lambda rng, cell, host, time: (
        rng.normal(size=cell.size) * np.where(np.arange(cell.size) >= at, ratio, 1.0)
    )


def ramp(size):
    """The mean rises evenly over the campaign."""
    return lambda rng, cell, host, time: rng.normal(size=cell.size) + size * np.linspace(0, 1, cell.size)


def host_ramp(size):
    return lambda rng, cell, host, time: (
        rng.normal(size=cell.size) + size * np.linspace(0, 1, cell.size) * (host == 0)
    )


def shifted_from_the_first(size):
    return lambda rng, cell, host, time: rng.normal(size=cell.size) + size


def host_of_its_own_cell(size):
    """The first cell ran on a host of its own, which is off: nothing to compare it with."""
    return lambda rng, cell, host, time: rng.normal(size=cell.size) + size * (cell == 0)


NULLS = (
    Scenario(name="normal", make=normal),
    Scenario(name="t, 2.2 degrees of freedom", make=student),
    Scenario(name="lognormal", make=lognormal),
    Scenario(name="unequal spreads", make=unequal_spreads),
    Scenario(name="coarsely rounded", make=rounded),
    Scenario(name="normal, 16 hosts", make=normal, n_hosts=16),
    Scenario(name="normal, 200 cells, pooled", make=normal, n_cells=200, baseline="pooled"),
)

ORDER_MEAN = frozenset({("serial", "order"), ("drift", "order")})
HOST_MEAN = frozenset({("drift", "host"), ("serial", "host")})
DRIFT = frozenset({("drift", "order")})
ALTERNATIVES = (
    Scenario(
        name="AR(1) .3",
        make=serial(0.3),
        planted=frozenset({("serial", "order")}),
        median_level=205,
        lead_level=0.88,
        start=0,
    ),
    Scenario(
        name="AR(1) .6",
        make=serial(0.6),
        planted=frozenset({("serial", "order")}),
        median_level=70,
        lead_level=0.88,
        start=0,
    ),
    Scenario(
        name="AR(1) .4 within hosts",
        make=serial_within_hosts(0.4),
        planted=frozenset({("serial", "host")}),
        median_level=130,
        lead_level=0.88,
        start=0,
    ),
    Scenario(
        name="ICC .1, 16 hosts",
        make=batch(0.1),
        n_hosts=16,
        planted=frozenset({("batch", "host")}),
        median_level=310,
        lead_level=0.78,
        start=0,
    ),
    Scenario(
        name="ICC .3, 16 hosts",
        make=batch(0.3),
        n_hosts=16,
        planted=frozenset({("batch", "host")}),
        median_level=125,
        lead_level=0.78,
        start=0,
    ),
    Scenario(
        name="step of 0.5 sd at 300",
        make=step(0.5),
        planted=DRIFT,
        median_level=430,
        lead_level=0.88,
        start=CHANGE_AT,
    ),
    Scenario(
        name="step of 1 sd at 300",
        make=step(1.0),
        planted=DRIFT,
        median_level=340,
        lead_level=0.88,
        start=CHANGE_AT,
    ),
    Scenario(
        name="one of 4 hosts steps 1 sd at 300",
        make=host_step(1.0),
        planted=HOST_MEAN,
        median_level=435,
        lead_level=0.88,
        host_level=0.95,
        start=CHANGE_AT,
    ),
    Scenario(
        name="one of 16 hosts steps 2 sd at 300",
        make=host_step(2.0),
        n_hosts=16,
        planted=HOST_MEAN,
        median_level=490,
        lead_level=0.88,
        host_level=0.95,
        start=CHANGE_AT,
    ),
    Scenario(
        name="daily cycle of amplitude 0.5 sd",
        make=daily(0.5),
        planted=ORDER_MEAN | {("clock", "order")},
        median_level=175,
        start=0,
        clock_level=True,
    ),
    Scenario(
        name="spread x 1.6 at 300",
        make=spread(1.6),
        planted=frozenset({("spread", "order")}),
        median_level=425,
        lead_level=0.88,
        start=CHANGE_AT,
    ),
    Scenario(
        name="step of 0.5 sd at 4,000 of 5,000",
        make=step(0.5, 4000),
        n_runs=5000,
        planted=DRIFT,
        median_level=4150,
        lead_level=0.88,
        start=4000,
    ),
    Scenario(
        name="AR(1) .3, 200 cells, pooled",
        make=serial(0.3),
        n_runs=2000,
        n_cells=200,
        baseline="pooled",
        planted=frozenset({("serial", "order")}),
        median_level=830,
        lead_level=0.88,
        start=0,
    ),
)


BLIND_SPOTS = (
    *(Scenario(name=f"step of {size} sd at 300", make=step(size)) for size in (0.2, 0.3, 0.4)),
    Scenario(name="step of 0.5 sd at 50", make=step(0.5, 50)),
    Scenario(name="step of 0.5 sd at 100", make=step(0.5, 100)),
    Scenario(name="ramp of 0.5 sd over the campaign", make=ramp(0.5)),
    Scenario(name="ramp of 1 sd over the campaign", make=ramp(1.0)),
    Scenario(name="one of 4 hosts ramps 2 sd", make=host_ramp(2.0)),
    Scenario(name="spread x 1.3 at 300", make=spread(1.3)),
    Scenario(name="spread x 0.6 at 300", make=spread(0.6)),
    Scenario(name="AR(1) -.3", make=serial(-0.3)),
    Scenario(name="AR(1) .1", make=serial(0.1)),
    Scenario(name="AR(1) .2", make=serial(0.2)),
    Scenario(name="ICC .05, 4 hosts", make=batch(0.05)),
    Scenario(name="ICC .03, 16 hosts", make=batch(0.03), n_hosts=16),
    Scenario(name="AR(1) .3, 200 cells of 5 runs", make=serial(0.3), n_cells=200),
    Scenario(name="AR(1) .6, 200 cells of 5 runs", make=serial(0.6), n_cells=200),
    Scenario(name="AR(1) .6, 500 cells of 2 runs", make=serial(0.6), n_cells=500),
    Scenario(name="AR(1) .6, 500 cells of 2 runs, pooled", make=serial(0.6), n_cells=500, baseline="pooled"),
    Scenario(name="1 sd in every run from the first on", make=shifted_from_the_first(1.0)),
    Scenario(name="1 sd on a host that ran one cell only", make=host_of_its_own_cell(1.0)),
)
"""What is found late, seldom or never."""


def campaign(scenario, seed):
    """Arguments of `replay` for one campaign."""
    rng = np.random.default_rng(seed)
    cell = order_of_cells(rng, scenario.n_runs, scenario.n_cells)
    host = rng.integers(scenario.n_hosts, size=scenario.n_runs)
    time = np.arange(scenario.n_runs) * 86_400.0 / RUNS_PER_DAY
    values = scenario.make(rng, cell, host, time) + 3.0 * cell
    return {
        "values": values,
        "cells": cell.astype(str),
        "nuisance": {"host": host.astype(str)},
        "times": time,
        "baseline": scenario.baseline,
    }
