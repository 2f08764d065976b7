"""What a source, a loop, an alarm is told: frozen records with units. Nothing here reads a file.

Durations are in seconds, rates in rows, percentages in percent. A signal is named `source.signal` everywhere
outside its own source.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

Range = tuple[float, float]
Decode = Literal["csv", "json", "senml", "plain"]
Checksum = Literal["none", "xor8", "crc16"]
TimeUnit = Literal["s", "ms", "us", "ns"]
Structure = Literal["output_error", "equation_error", "physical"]
Priority = Literal["high", "medium", "low"]

SECONDS_PER_UNIT: dict[str, float] = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "ns": 1e-9}


@dataclass(frozen=True, slots=True)
class Place:
    """Where a value stands in a message: a CSV column, a JSON path or a SenML name, on one topic or on every one.

    Exactly one of `column`, `path`, `name` is set; none of them for `plain` (the payload is the value).
    """

    column: int | None = None
    path: str | None = None
    name: str | None = None
    topic: str | None = None


@dataclass(frozen=True, slots=True)
class Scale:
    """Linear map from raw counts to engineering units: `raw` ends go to `value` ends."""

    raw: Range
    value: Range


@dataclass(frozen=True, slots=True)
class Quality:
    """A reading counts only while the value at `place` equals `good`."""

    place: Place
    good: bool | float | str


@dataclass(frozen=True, slots=True)
class Signal:
    """One measured quantity of a source, in `unit` after `scale`."""

    name: str  # source.signal
    place: Place
    unit: str = ""
    limits: Range | None = None  # the actuator's ends
    plausible: Range | None = None  # what the instrument can truly show
    resolution: float | None = None  # one count, in `unit`
    scale: Scale | None = None
    quality: Quality | None = None


@dataclass(frozen=True, slots=True)
class TimeField:
    """Where the payload carries its time, and in which unit."""

    place: Place
    unit: TimeUnit = "s"


@dataclass(frozen=True, slots=True)
class SerialPort:
    port: str
    baud: int = 115200
    byte_size: int = 8
    parity: Literal["none", "even", "odd"] = "none"
    stop_bits: int = 1


@dataclass(frozen=True, slots=True)
class MqttFeed:
    topic: str  # may hold the wildcards + and #
    qos: int = 0


@dataclass(frozen=True, slots=True)
class Source:
    """Where readings come from. Exactly one of `serial` and `mqtt` is set."""

    name: str
    decode: Decode
    signals: tuple[Signal, ...]
    serial: SerialPort | None = None
    mqtt: MqttFeed | None = None
    time: TimeField | None = None  # None: the arrival time counts
    checksum: Checksum = "none"

    @property
    def has_payload_time(self) -> bool:
        """SenML records always carry their own time."""
        return self.time is not None or self.decode == "senml"


@dataclass(frozen=True, slots=True)
class Tls:
    ca_file: str | None = None
    cert_file: str | None = None
    key_file: str | None = None


@dataclass(frozen=True, slots=True)
class Broker:
    host: str = "127.0.0.1"
    port: int = 1883
    prefix: str = "rtid"
    username: str | None = None
    password_file: str | None = None
    tls: Tls | None = None

    @property
    def address(self) -> str:
        return f"{self.host}:{self.port}"


@dataclass(frozen=True, slots=True)
class Model:
    structure: Structure = "output_error"
    order: int = 1
    integrating: bool = False
    dead_time_s: Range = (0.0, 0.0)  # least, most; equal ends: known


@dataclass(frozen=True, slots=True)
class Condition:
    """A gate on one signal: exactly one of `above`, `below`, `equals`."""

    signal: str
    above: float | None = None
    below: float | None = None
    equals: float | None = None


@dataclass(frozen=True, slots=True)
class Gate:
    """Active while every condition holds, `settle_s` after they begin to."""

    conditions: tuple[Condition, ...]
    settle_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Baseline:
    automatic: bool = True
    after_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Tolerance:
    """How far each quantity may leave the baseline before it is called drift, in percent of the baseline."""

    gain_pct: float = 10.0
    time_constant_pct: float = 20.0
    dead_time_pct: float = 30.0
    noise_pct: float = 50.0


@dataclass(frozen=True, slots=True)
class AlarmBudget:
    false_alarms: float = 1.0
    per_days: float = 30.0

    def rows_per_false_alarm(self, period_s: float) -> float:
        return self.per_days * 86400.0 / (period_s * self.false_alarms)


@dataclass(frozen=True, slots=True)
class AlarmSetting:
    priority: Priority = "low"
    on_delay_s: float = 0.0
    off_delay_s: float = 0.0
    latching: bool = False


_LOW, _MEDIUM = AlarmSetting(), AlarmSetting(priority="medium")

DEFAULT_ALARMS: dict[str, AlarmSetting] = {  # every alarm there is; a configuration changes single values
    "plant_shift": _LOW,
    "plant_drift": _LOW,
    "noise_change": _LOW,
    "cannot_judge": _LOW,
    "estimate_invalid": _MEDIUM,
    "data_stale": _MEDIUM,
    "data_gap": _LOW,
    "out_of_range": _MEDIUM,
    "frozen_signal": _LOW,
    "saturated": _LOW,
    "outliers": _LOW,
    "timing": _LOW,
    "oscillation": _LOW,
    "storage": _MEDIUM,
    "clock": _LOW,
}


@dataclass(frozen=True, slots=True)
class Controller:
    """The present settings, kept for the retuning advice. Gains in engineering units unless spans are given."""

    kp: float
    ti_s: float | None = None
    td_s: float = 0.0
    form: Literal["ideal", "series", "parallel"] = "ideal"
    action: Literal["reverse", "direct"] | None = None
    period_s: float | None = None
    filter_s: float = 0.0
    input_span: float | None = None
    output_span: float | None = None


@dataclass(frozen=True, slots=True)
class Loop:
    """One plant: what it is told about itself. Every default that depends on the period is already filled in."""

    name: str
    inputs: tuple[str, ...]
    output: str
    period_s: float
    model: Model
    memory_s: float
    stale_after_s: float
    baseline: Baseline
    units: dict[str, str] = field(default_factory=dict)  # signal name -> unit
    ranges: dict[str, Range] = field(default_factory=dict)  # signal name -> plausible range
    limits: dict[str, Range] = field(default_factory=dict)  # signal name -> actuator's ends
    resolutions: dict[str, float] = field(default_factory=dict)  # signal name -> one count
    active_when: Gate | None = None
    tolerance: Tolerance = Tolerance()
    alarm_budget: AlarmBudget = AlarmBudget()
    alarms: dict[str, AlarmSetting] = field(default_factory=dict)
    controller: Controller | None = None
    publish_every_s: float = 1.0

    @property
    def signals(self) -> tuple[str, ...]:
        """Columns of a row: the inputs, the output, then the signals that only the gate reads."""
        gate = self.active_when.conditions if self.active_when else ()
        return tuple(dict.fromkeys((*self.inputs, self.output, *(c.signal for c in gate))))

    @property
    def block_rows(self) -> int:
        """Rows in a block: the largest of 16, 8, 4, 2, 1 that lasts at most five seconds."""
        return next((m for m in (16, 8, 4, 2) if m * self.period_s <= 5.0), 1)


@dataclass(frozen=True, slots=True)
class Node:
    """The whole configuration."""

    name: str
    sources: dict[str, Source]
    loops: dict[str, Loop]
    state_dir: str
    broker: Broker | None = None
    publish_every_s: float = 1.0
    record_keep_mb: float = 64.0
    notes: tuple[str, ...] = ()  # remarks for `check`: what is accepted here but has no effect yet
