"""The `sources` section: where readings come from, and how their payloads are written."""

from __future__ import annotations

from typing import get_args

from rtid.config.entry import Entry, Kind, Section, record
from rtid.config.signals import Carrier, place, signals
from rtid.config.topics import FILTER
from rtid.config.values import TEXT, choice, integer, named
from rtid.settings import Broker, Checksum, Decode, MqttFeed, SerialPort, Source, TimeField, TimeUnit

DECODES: tuple[Decode, ...] = get_args(Decode)
CHECKSUMS: tuple[Checksum, ...] = get_args(Checksum)
TIME_UNITS: tuple[TimeUnit, ...] = get_args(TimeUnit)

_KEYS = ("serial", "mqtt", "decode", "time", "checksum", "signals")
_SERIAL = record(
    "the serial port",
    SerialPort,
    {
        "port": TEXT,
        "baud": integer(least=50, most=4_000_000),
        "byte_size": choice((5, 6, 7, 8)),
        "parity": choice(("none", "even", "odd")),
        "stop_bits": choice((1, 2)),
    },
)
_MQTT = record("the MQTT topic", MqttFeed, {"topic": FILTER, "qos": choice((0, 1, 2))})


def sources(entry: Entry, broker: Broker | None) -> dict[str, Source]:
    """Every source by its name. MQTT sources need the broker."""
    found = named(entry, lambda below, name: _source(below, name, broker), "the sources that are read")
    ports: dict[str, str] = {}
    for name, source in found.items():
        if source.serial is not None and (other := ports.setdefault(source.serial.port, name)) != name:
            at = entry.below(name, entry.mapping("sources")[name])
            at.refuse(f"source '{other}' reads this serial port already; expected a port of its own")
    return found


def _source(entry: Entry, name: str, broker: Broker | None) -> Source:
    section = Section(entry, _KEYS)
    if len(section.given(("serial", "mqtt"))) != 1:
        entry.refuse("found both serial and mqtt, or neither; expected exactly one of them")
    serial = section.get("serial", _SERIAL, None)
    mqtt = section.get("mqtt", _MQTT, None)
    if mqtt is not None and broker is None:
        section.at("mqtt").refuse("the file names no broker; expected a section `broker: {host: …}` beside `sources`")
    if mqtt is not None and "checksum" in section:
        section.at("checksum").refuse("MQTT guards its payloads itself; remove it, checksums are for serial lines")
    carrier = Carrier(source=name, decode=section.need("decode", choice(DECODES)), mqtt=mqtt)
    return Source(
        name=name,
        decode=carrier.decode,
        serial=serial,
        mqtt=mqtt,
        time=section.get("time", lambda below: _time(below, carrier), None),
        checksum=section.get("checksum", choice(CHECKSUMS), "none"),
        signals=section.need("signals", Kind("the signals of this source", lambda below: signals(below, carrier))),
    )


def _time(entry: Entry, carrier: Carrier) -> TimeField:
    if carrier.decode == "plain":
        entry.refuse("a plain payload carries no time; remove it, the arrival time counts")
    if carrier.decode == "senml":
        entry.refuse("a SenML record carries its own time; remove it")
    section = Section(entry, ("column", "path", "name", "unit"))
    return TimeField(place=place(section, carrier), unit=section.get("unit", choice(TIME_UNITS), "s"))
