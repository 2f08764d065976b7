"""SenML in JSON (RFC 8428): a pack of records, resolved to one message per time.

Name is `bn` + `n`, time `bt` + `t`, value `bv` + `v` or the boolean `vb`; records without either (text, data, sums)
are no samples, though `vs` may carry a quality. A time from 2^28 on is Unix time and is the data time as it stands; a
smaller one is relative to now, which here is the arrival, so data time is then on the monotonic clock of this
computer. A device should keep to one of the two: a change between them looks like a restart of its clock.
"""

from __future__ import annotations

import math
from typing import Any

from rtid.intake import decode_json
from rtid.intake.decode_values import Message, Scalar, excerpt
from rtid.intake.reading import Rejected
from rtid.settings import Place, TimeField

ABSOLUTE_FROM = float(2**28)  # RFC 8428, section 4.5.3
NEWEST_VERSION = 10.0


class SenmlMessage(Message):
    """The records of one pack that hold at one time, by resolved name."""

    def __init__(self, time: float) -> None:
        self._time = time
        self.values: dict[str, Scalar] = {}

    def value(self, place: Place) -> Scalar | None:
        return self.values.get(place.name or "")

    def time(self, field: TimeField | None, arrival: float) -> float:
        return self._time if self._time >= ABSOLUTE_FROM else arrival + self._time


def parse(payload: bytes) -> list[SenmlMessage]:
    """The messages of a pack in the order of their times. Raises Rejected('senml') or Rejected('json')."""
    records = decode_json.load(payload)
    if not isinstance(records, list) or not all(isinstance(record, dict) for record in records):
        raise Rejected("senml", "a SenML pack is a list of records")
    messages: dict[float, SenmlMessage] = {}
    base: dict[str, Any] = {}
    for record in records:
        base.update({key: value for key, value in record.items() if key in ("bn", "bt", "bv", "bver")})
        _check(record, base)
        value = _value(record, base)
        if value is not None:
            time = _time(record, base)
            name = base.get("bn", "") + record.get("n", "")
            messages.setdefault(time, SenmlMessage(time)).values[name] = value
    return [messages[time] for time in sorted(messages)]


def _check(record: dict[str, Any], base: dict[str, Any]) -> None:
    unknown = next((key for key in record if key.endswith("_")), None)
    if unknown is not None:
        raise Rejected("senml", f"the field {excerpt(unknown)} must be understood, and is not")
    if not isinstance(base.get("bn", ""), str) or not isinstance(record.get("n", ""), str):
        raise Rejected("senml", "a SenML name is text")
    if _sum(base.get("bver"), None) > NEWEST_VERSION:
        raise Rejected("senml", f"SenML version {excerpt(base['bver'])} is newer than {NEWEST_VERSION:.0f}")


def _value(record: dict[str, Any], base: dict[str, Any]) -> Scalar | None:
    """None for a record that is no sample; a value that is not finite costs its own signal later, not the pack."""
    if "v" in record:
        return _sum(base.get("bv"), record["v"])
    value = record.get("vb", record.get("vs"))
    return value if isinstance(value, (bool, str)) else None


def _time(record: dict[str, Any], base: dict[str, Any]) -> float:
    time = _sum(base.get("bt"), record.get("t"))
    if not math.isfinite(time):
        raise Rejected("time", f"{excerpt(time)} is not a time")
    return time


def _sum(base: Any, value: Any) -> float:
    """Both as numbers; an absent one counts as zero."""
    total = 0.0
    for term in (base, value):
        if not isinstance(term, float | None):
            raise Rejected("senml", f"{excerpt(term)} stands where SenML has a number")
        total += term or 0.0
    return total
