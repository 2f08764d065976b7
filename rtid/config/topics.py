"""The kinds of MQTT topics in the configuration: a filter to subscribe to, a topic that carries one value."""

from __future__ import annotations

from rtid import topics
from rtid.config.entry import Entry, Kind
from rtid.config.values import TEXT


def _filter(entry: Entry) -> str:
    text = TEXT(entry)
    if not topics.is_filter(text):
        entry.refuse(f"'{text}' is no topic filter; expected '+' or '#' alone between slashes, '#' only at the end")
    return text


def _topic(entry: Entry) -> str:
    topic = TEXT(entry)
    if topics.has_wildcard(topic):
        entry.refuse(f"'{topic}' holds a wildcard; expected the one topic that carries this value")
    return topic


FILTER = Kind("an MQTT topic, '+' and '#' allowed", _filter)
TOPIC = Kind("an MQTT topic without wildcards", _topic)
