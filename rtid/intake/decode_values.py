"""What all payload formats share: strict numbers, times, quality, scale, and the shape of a decoded message."""

from __future__ import annotations

import math
import re
from abc import ABC, abstractmethod
from datetime import UTC, datetime

from rtid.intake.reading import Rejected
from rtid.settings import SECONDS_PER_UNIT, Place, Quality, Scale, TimeField

Scalar = float | bool | str  # what a payload holds in one place

NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")


class Message(ABC):
    """The part of one payload that holds at one time."""

    @abstractmethod
    def value(self, place: Place) -> Scalar | None:
        """What stands at `place`; None when it is absent and need not be there. Raises Rejected('missing')."""

    def time(self, field: TimeField | None, arrival: float) -> float:
        """Data time in seconds: the payload's, or `arrival` where no time is declared. Raises Rejected('time')."""
        if field is None:
            return arrival
        try:
            return seconds(self.value(field.place), field.unit)
        except Rejected as problem:
            raise Rejected("time", f"time: {problem.text}") from None


def excerpt(raw: object) -> str:
    """`raw` on one line of plain ASCII, cut to a readable length."""
    text = ascii(raw)
    return text if len(text) <= 40 else f"{text[:37]}..."


def parse_number(text: str) -> float:
    """A finite number from plain ASCII decimals; `float()` alone takes `1_0`, `infinity` and digits of other scripts.

    Raises Rejected('number').
    """
    if not NUMBER.fullmatch(text):
        raise Rejected("number", f"{excerpt(text)} is not a number")
    return _finite(float(text), text)


def number(raw: Scalar) -> float:
    """A finite number from a number or a boolean (true is 1, false is 0). Raises Rejected('number')."""
    if isinstance(raw, str):
        raise Rejected("number", f"{excerpt(raw)} is text, not a number")
    return _finite(float(raw), raw)


def seconds(raw: Scalar | None, unit: str) -> float:
    """A time in seconds from a number in `unit` or from ISO 8601 / RFC 3339 text.

    Text gives seconds since 1970; without an offset it is taken as UTC, because local time jumps twice a year.
    """
    if raw is None or isinstance(raw, bool):
        raise Rejected("time", f"{excerpt(raw)} is not a time")
    if isinstance(raw, str):
        return _iso_seconds(raw)
    return _finite(raw * SECONDS_PER_UNIT[unit], raw)


def check_quality(quality: Quality, raw: Scalar | None) -> None:
    """Raises Rejected('quality') unless `raw` equals the good value; true, `true`, 1 and `1` are equal."""
    if raw is None or _plain(raw) != _plain(quality.good):
        raise Rejected("quality", f"quality is {excerpt(raw)}, good is {excerpt(quality.good)}")


def scaled(raw: float, scale: Scale) -> float:
    """`raw` counts in engineering units. Raises Rejected('number') on overflow."""
    (raw_low, raw_high), (low, high) = scale.raw, scale.value
    return _finite(low + (raw - raw_low) * (high - low) / (raw_high - raw_low), raw)


def _finite(value: float, raw: object) -> float:
    if not math.isfinite(value):
        raise Rejected("number", f"{excerpt(raw)} is not a finite number")
    return value


def _iso_seconds(text: str) -> float:
    if not text.isascii():
        raise Rejected("time", f"{excerpt(text)} is not a time")
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        raise Rejected("time", f"{excerpt(text)} is neither a number nor an ISO 8601 time") from None
    return (moment if moment.tzinfo else moment.replace(tzinfo=UTC)).timestamp()


def _plain(value: Scalar) -> float | str:
    if not isinstance(value, str):
        return float(value)
    if value.lower() in ("true", "false"):
        return float(value.lower() == "true")
    return float(value) if NUMBER.fullmatch(value) else value
