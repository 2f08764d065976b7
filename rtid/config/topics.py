"""MQTT topic names and filters (MQTT 5.0, section 4.7): which are well formed."""

from __future__ import annotations

from rtid.config.entry import Entry, Kind
from rtid.config.values import TEXT


def _filter(entry: Entry) -> str:
    pattern = TEXT(entry)
    *before, last = pattern.split("/")
    if "#" in before or any(len(level) > 1 and set(level) & {"+", "#"} for level in (*before, last)):
        entry.refuse(f"'{pattern}' is no topic filter; expected '+' or '#' alone between slashes, '#' only at the end")
    return pattern


def _topic(entry: Entry) -> str:
    topic = TEXT(entry)
    if set(topic) & {"+", "#"}:
        entry.refuse(f"'{topic}' holds a wildcard; expected the one topic that carries this value")
    return topic


FILTER = Kind("an MQTT topic, '+' and '#' allowed", _filter)
TOPIC = Kind("an MQTT topic without wildcards", _topic)
