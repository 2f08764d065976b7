"""Which topics a topic filter means (MQTT 5.0, section 4.7)."""

from __future__ import annotations

from paho.mqtt.client import topic_matches_sub


def matches(filter_: str, topic: str) -> bool:
    """True when `topic` falls under `filter_`: `+` stands for one level, a last `#` for any number of them.

    A filter that begins with a wildcard does not match topics that begin with `$`.
    """
    return topic_matches_sub(filter_, topic)
