"""Payloads as dictionaries, exactly as the schemas in `rtid/schemas/` describe them, and their bytes.

Times are RFC 3339 in UTC with milliseconds. Every number is finite or None, and the keys never vary with the data.
"""

from __future__ import annotations

import dataclasses
import json
import math
from collections.abc import Iterable, Mapping
from datetime import UTC, datetime
from typing import Any

from rtid import __version__
from rtid.report import ActiveAlarm, Report, Transition

OFFLINE = b'{"state":"offline"}'  # the will, and the last word of a clean stop

Payload = dict[str, Any]

EARLIEST = datetime(1, 1, 1, tzinfo=UTC).timestamp()
LATEST = datetime(9999, 12, 31, 23, 59, 59, tzinfo=UTC).timestamp()


def stamp_text(stamp: float) -> str:
    """`stamp` (seconds since 1970) as text; a stamp outside the years 1 to 9999 becomes the nearest one inside."""
    moment = datetime.fromtimestamp(min(max(float(stamp), EARLIEST), LATEST), UTC)
    return moment.isoformat(timespec="milliseconds").removesuffix("+00:00") + "Z"


def plain(value: Any) -> Any:
    """`value` with records, arrays and numpy numbers turned to what JSON knows; a number that is not finite is None."""
    if hasattr(value, "tolist"):
        value = value.tolist()
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        value = dataclasses.asdict(value)
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def dump(payload: Mapping[str, Any]) -> bytes:
    """Compact JSON by RFC 8259. Raises ValueError for a number that is not finite."""
    return json.dumps(payload, allow_nan=False, separators=(",", ":"), ensure_ascii=False).encode("utf-8")


def status(node: str, *, stamp: float, loops: Iterable[str]) -> Payload:
    """The node is there: `state` is `online`."""
    return {
        "schema": "rtid/status/1",
        "time": stamp_text(stamp),
        "node": node,
        "state": "online",
        "version": __version__,
        "loops": list(loops),
    }


def model(report: Report, node: str) -> Payload:
    return _head("model", report, node) | {
        "state": report.state,
        "samples": int(report.samples),
        "quantities": plain(report.quantities),
    }


def drift(report: Report, node: str) -> Payload:
    """The dashboard's payload, below 1 kB."""
    found = report.drift
    last = found.last_informative
    return _head("drift", report, node) | {
        "drift_ratio": plain(found.ratio),
        "worst_quantity": found.worst_quantity,
        "change_pct": plain(found.change_pct),
        "low_pct": plain(found.low_pct),
        "high_pct": plain(found.high_pct),
        "detectable_gain_pct": plain(found.detectable_gain_pct),
        "last_informative": None if last is None else stamp_text(last),
    }


def health(report: Report, node: str) -> Payload:
    return _head("health", report, node) | {
        "health": report.health,
        "state": report.state,
        "since": stamp_text(report.since),
        "reason": report.reason,
        "alarms": [active_alarm(alarm) for alarm in report.alarms],
    }


def active_alarm(alarm: ActiveAlarm) -> Payload:
    """An alarm that stands, as `health` and snapshots list it."""
    return {
        "alarm": alarm.alarm,
        "signal": alarm.signal,
        "quantity": alarm.quantity,
        "priority": alarm.priority,
        "since": stamp_text(alarm.since),
        "acknowledged": alarm.acknowledged,
        "text": alarm.text,
    }


def event(transition: Transition, *, node: str, loop: str, sequence: int) -> Payload:
    """A line of the event list, and the payload of `alarm/<name>`. An action stands as `action` in place of `alarm`."""
    subject = {"action": transition.action} if transition.alarm is None else {"alarm": transition.alarm}
    detail = {} if transition.detail is None else {"detail": plain(transition.detail)}
    return {
        "schema": "rtid/event/1",
        "sequence": sequence,
        "time": stamp_text(transition.stamp),
        "time_s": plain(transition.time_s),
        "node": node,
        "loop": loop,
        **subject,
        "transition": transition.transition,
        "priority": transition.priority,
        "signal": transition.signal,
        "quantity": transition.quantity,
        "change_pct": plain(transition.change_pct),
        "low_pct": plain(transition.low_pct),
        "high_pct": plain(transition.high_pct),
        "region": transition.region,
        "by": transition.by,
        "text": transition.text,
        **detail,
    }


def transition_of(event: Payload) -> Transition:
    """What `event` was made of, but for `retain`. Raises KeyError or ValueError for what is no event."""
    names = {field.name for field in dataclasses.fields(Transition)} & event.keys()
    told = {name: event[name] for name in names} | {"stamp": datetime.fromisoformat(event["time"]).timestamp()}
    return Transition(**{"alarm": None, "action": None} | told)


def snapshot(body: Mapping[str, Any], *, node: str, stamp: float) -> Payload:
    """`body` is what `Loop.snapshot` gives; its stamps (seconds) become texts."""
    head = {"schema": "rtid/snapshot/1", "version": __version__, "time": stamp_text(stamp), "node": node}
    document: Payload = head | plain(body)
    document["alarms"] = [active_alarm(alarm) for alarm in body["alarms"]]
    for part, key in (("information", "last_informative"), ("baseline", "time")):
        if document[part] is not None and document[part][key] is not None:
            document[part][key] = stamp_text(document[part][key])
    return document


def _head(kind: str, report: Report, node: str) -> Payload:
    return {"schema": f"rtid/{kind}/1", "time": stamp_text(report.stamp), "node": node, "loop": report.loop}
