"""What one loop says at the end of a block: plain records, no behaviour, no clock.

`stamp` is a label in seconds since 1970 that came with the rows; it is printed and never computed with.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

State = Literal["waiting", "learning", "watching", "held", "stale", "inactive"]
Health = Literal["good", "maintenance_required", "out_of_specification", "function_check", "failure"]
TransitionName = Literal["active", "updated", "cleared", "acknowledged", "shelved", "unshelved"]


@dataclass(frozen=True, slots=True)
class Quantity:
    """An estimate with its standard error and its 95 % limits; all None while unknown."""

    value: float | None
    std_error: float | None
    low: float | None
    high: float | None
    unit: str


@dataclass(frozen=True, slots=True)
class Drift:
    """How far the plant is from its baseline. `ratio`: largest statistic over its threshold (None: no baseline)."""

    ratio: float | None = None
    worst_quantity: str | None = None
    change_pct: float | None = None
    low_pct: float | None = None
    high_pct: float | None = None
    detectable_gain_pct: float | None = None
    last_informative: float | None = None  # stamp


@dataclass(frozen=True, slots=True)
class Transition:
    """One step in the life of an alarm, or an action (`action` in place of `alarm`)."""

    alarm: str | None
    transition: TransitionName | None
    priority: str
    text: str
    time_s: float  # data time of the decision
    stamp: float
    action: str | None = None
    signal: str | None = None  # for the alarms of one signal
    quantity: str | None = None
    change_pct: float | None = None
    low_pct: float | None = None
    high_pct: float | None = None
    region: str | None = None
    by: str | None = None
    retain: bool = True  # False: back to normal and acknowledged, the retained message is emptied
    detail: Mapping[str, Any] | None = None  # plain values that belong to one kind of action only


@dataclass(frozen=True, slots=True)
class ActiveAlarm:
    """An alarm that stands."""

    alarm: str
    priority: str
    since: float  # stamp
    text: str
    signal: str | None = None
    quantity: str | None = None
    acknowledged: bool = False


@dataclass(frozen=True, slots=True)
class Report:
    """The loop at the end of one block.

    `due` is true at the block ends at which `publish_every_s` of data time have passed: the slow path ran and the
    report is to be published; in between, only `transitions` matter.
    """

    loop: str
    time_s: float  # data time of the last row
    stamp: float
    samples: int  # accepted rows since the start of learning
    state: State
    health: Health
    since: float  # stamp at which `health` took its present value
    reason: str
    due: bool
    quantities: dict[str, Quantity] = field(default_factory=dict)
    drift: Drift = Drift()
    transitions: tuple[Transition, ...] = ()
    alarms: tuple[ActiveAlarm, ...] = ()
