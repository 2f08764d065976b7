"""MQTT topic names and filters (MQTT 5.0, section 4.7)."""

from __future__ import annotations

from paho.mqtt.client import topic_matches_sub

_ONE_LEVEL, _ALL_BELOW = "+", "#"


def has_wildcard(text: str) -> bool:
    """True for a filter that may stand for several topics."""
    return _ONE_LEVEL in text or _ALL_BELOW in text


def is_filter(text: str) -> bool:
    """True when every wildcard stands alone between slashes, and `#` only at the end."""
    *before, last = text.split("/")
    return _ALL_BELOW not in before and not any(len(level) > 1 and has_wildcard(level) for level in (*before, last))


def matches(filter_: str, topic: str) -> bool:
    """True when `topic` falls under `filter_`: `+` stands for one level, a last `#` for any number of them.

    A filter that begins with a wildcard does not match topics that begin with `$`.
    """
    return topic_matches_sub(filter_, topic)
