"""What a rehearsal supposes: exchangeable runs, and named dependences of a stated strength."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from types import MappingProxyType

from auditd.errors import BadInput
from auditd.simulate import (
    Autoregressive,
    BatchEffects,
    DailyCycle,
    Drift,
    Fault,
    Layout,
    SpreadJump,
    StepShift,
)


@dataclass(frozen=True, kw_only=True)
class Scenario:
    """One supposition.

    Attributes
    ----------
    name : as given to `rehearse --scenario`, such as `icc=0.1`.
    kind : the kind of warning that names it rightly; `none` for exchangeable runs.
    along : `order`, `host`, or None where any order will do.
    strength : its size; the unit is the form's (see `FORMS`).
    effects : the effects for a layout whose machine nuisance is called as stated.
    """

    name: str
    kind: str
    along: str | None
    strength: float
    effects: Callable[[Layout, str], tuple[Fault, ...]]


@dataclass(frozen=True, kw_only=True)
class Form:
    """A scenario without its strength: limits belong to it, and `means` says what the number is."""

    kind: str
    along: str | None
    low: float
    high: float
    means: str
    make: Callable[[float, Layout, str], Fault]


def _spread_at_middle(ratio: float, layout: Layout, host: str) -> Fault:
    del host
    return SpreadJump(at=layout.n // 2, ratio=ratio)


def _step_at_middle(size: float, layout: Layout, host: str) -> Fault:
    return StepShift(at=layout.n // 2, size=size, along=host, level=str(layout.nuisance[host][0]))


def _drift_from_third(size: float, layout: Layout, host: str) -> Fault:
    return Drift(at=layout.n // 3, size=size, along=host, level=str(layout.nuisance[host][0]))


FORMS: MappingProxyType[str, Form] = MappingProxyType(
    {
        "icc": Form(
            kind="batch",
            along="host",
            low=0.0,
            high=0.99,
            means="intraclass correlation of the runs of a host",
            make=lambda size, _, host: BatchEffects(icc=size, along=host),
        ),
        "ar": Form(
            kind="serial",
            along="order",
            low=-0.99,
            high=0.99,
            means="correlation of neighbours in the order, AR(1)",
            make=lambda size, _, __: Autoregressive(phi=size),
        ),
        "drift": Form(
            kind="drift",
            along="order",
            low=-100.0,
            high=100.0,
            means="rise in a straight line over the campaign, in standard deviations of a run",
            make=lambda size, _, __: Drift(at=0, size=size),
        ),
        "host-drift": Form(
            kind="drift",
            along="host",
            low=-100.0,
            high=100.0,
            means="rise of one host from a third of the campaign to its end, in standard deviations of a run",
            make=_drift_from_third,
        ),
        "host-step": Form(
            kind="drift",
            along="host",
            low=-100.0,
            high=100.0,
            means="step of one host in the middle of the campaign, in standard deviations of a run",
            make=_step_at_middle,
        ),
        "cycle": Form(
            kind="clock",
            along=None,
            low=-100.0,
            high=100.0,
            means="amplitude of a daily cycle, in standard deviations of a run",
            make=lambda size, _, __: DailyCycle(amplitude=size),
        ),
        "spread": Form(
            kind="spread",
            along="order",
            low=0.01,
            high=100.0,
            means="ratio of the standard deviations after and before the middle of the campaign",
            make=_spread_at_middle,
        ),
    }
)

EXCHANGEABLE = Scenario(
    name="exchangeable", kind="none", along=None, strength=0.0, effects=lambda _layout, _host: ()
)


def scenario_named(text: str) -> Scenario:
    """Return the scenario that `exchangeable` or `FORM=STRENGTH` names.

    Raises
    ------
    BadInput : an unknown form, no number, or one outside of the form's limits.
    """
    name, separator, number = text.strip().partition("=")
    if text.strip() == EXCHANGEABLE.name:
        return EXCHANGEABLE
    form = FORMS.get(name.strip())
    if form is None or not separator:
        raise BadInput(f"{text!r} is no scenario; write one of {', '.join(FORMS)} and =, such as icc=0.1")
    try:
        strength = float(number)
    except ValueError:
        raise BadInput(f"{text!r}: {number!r} is not a number; {name} is the {form.means}") from None
    if not form.low <= strength <= form.high:
        raise BadInput(
            f"{text!r}: {name} lies between {form.low:g} and {form.high:g}; it is the {form.means}"
        )
    return Scenario(
        name=f"{name.strip()}={strength:g}",
        kind=form.kind,
        along=form.along,
        strength=strength,
        effects=lambda layout, host: (form.make(strength, layout, host),),
    )


DEFAULT_SCENARIOS: tuple[Scenario, ...] = tuple(
    scenario_named(text)
    for text in (
        "exchangeable",
        "icc=0.1",
        "ar=0.3",
        "drift=1",
        "host-drift=2",
        "host-step=1.5",
        "cycle=0.4",
        "spread=1.5",
    )
)
