"""The `signals` of one source: where each value stands in a payload, its unit, ends and quality."""

from __future__ import annotations

from dataclasses import dataclass

from rtid.config.entry import Entry, Kind, Section
from rtid.config.topics import TOPIC
from rtid.config.values import TEXT, integer, named, number, pair
from rtid.settings import Decode, MqttFeed, Place, Quality, Scale, Signal
from rtid.topics import matches

PLACE_KEYS: dict[Decode, str | None] = {"csv": "column", "json": "path", "senml": "name", "plain": None}

_KEYS = ("column", "path", "name", "topic", "unit", "limits", "plausible", "resolution", "scale", "quality")
_COLUMN = integer(least=0, most=1000)


@dataclass(frozen=True, slots=True)
class Carrier:
    """How the payloads of one source come and are written."""

    source: str
    decode: Decode
    mqtt: MqttFeed | None


def signals(entry: Entry, carrier: Carrier) -> tuple[Signal, ...]:
    """The signals in the order of the file."""
    found = named(entry, lambda below, name: _signal(below, name, carrier), "the signals of this source")
    if carrier.decode == "plain":
        _check_plain(entry, found, carrier)
    return tuple(found.values())


def place(section: Section, carrier: Carrier) -> Place:
    """Where a value stands: the one key that belongs to the source's `decode`, and its topic."""
    right = PLACE_KEYS[carrier.decode]
    for key in section.given(key for key in PLACE_KEYS.values() if key not in {None, right}):
        mend = f"use '{right}'" if right else "remove it, the payload is the value"
        section.at(key).refuse(f"does not belong to decode: {carrier.decode}; {mend}")
    topic = section.get("topic", lambda entry: _topic(entry, carrier), None)
    match carrier.decode:
        case "csv":
            return Place(column=section.need("column", _COLUMN), topic=topic)
        case "json":
            return Place(path=section.need("path", TEXT), topic=topic)
        case "senml":
            return Place(name=section.need("name", TEXT), topic=topic)
        case "plain":
            return Place(topic=topic)


def _topic(entry: Entry, carrier: Carrier) -> str:
    if carrier.mqtt is None:
        entry.refuse("a serial source has no topics; remove it")
    topic = TOPIC(entry)
    if not matches(carrier.mqtt.topic, topic):
        entry.refuse(f"the source does not receive '{topic}'; expected a topic that '{carrier.mqtt.topic}' takes")
    return topic


def _signal(entry: Entry, name: str, carrier: Carrier) -> Signal:
    section = Section(entry, _KEYS)
    return Signal(
        name=f"{carrier.source}.{name}",
        place=place(section, carrier),
        unit=section.get("unit", TEXT, ""),
        limits=section.get("limits", pair("ascending"), None),
        plausible=section.get("plausible", pair("ascending"), None),
        resolution=section.get("resolution", number(above=0), None),
        scale=section.get("scale", _scale, None),
        quality=section.get("quality", lambda below: _quality(below, carrier), None),
    )


def _scale(entry: Entry) -> Scale:
    section = Section(entry, ("raw", "value"))
    return Scale(raw=section.need("raw", pair("distinct")), value=section.need("value", pair("distinct")))


def _quality(entry: Entry, carrier: Carrier) -> Quality:
    """The quality stands in the same message as the value."""
    if carrier.decode == "plain":
        entry.refuse("a plain payload carries no quality; remove it")
    section = Section(entry, ("column", "path", "name", "good"))
    return Quality(place=place(section, carrier), good=section.need("good", _GOOD))


def _good(entry: Entry) -> bool | float | str:
    content = entry.item.content
    if isinstance(content, bool):
        return content
    return number()(entry) if isinstance(content, int | float) else TEXT(entry)


_GOOD = Kind("the value of a good reading", _good)


def _check_plain(entry: Entry, found: dict[str, Signal], carrier: Carrier) -> None:
    """A plain payload is one number, so several signals need a topic each."""
    if len(found) > 1 and carrier.mqtt is None:
        entry.refuse(f"found {len(found)} signals; expected one, a plain line is one number (several: decode: csv)")
    seen: dict[str | None, str] = {}
    for name, signal in found.items():
        topic = signal.place.topic
        at = entry.below(name, entry.mapping("signals")[name])
        if topic is None and len(found) > 1:
            at.refuse("several signals and no topic; expected a topic for each, a plain payload is one number")
        if seen.setdefault(topic, name) != name:
            at.refuse(f"its topic feeds '{seen[topic]}' already; expected a topic of its own")
