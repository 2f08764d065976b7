"""Draws settings, and writes them as the configuration that should load to the same settings."""

from __future__ import annotations

import dataclasses
from typing import Any

from hypothesis import strategies as st

from rtid.settings import (
    AlarmBudget,
    AlarmSetting,
    Baseline,
    Broker,
    Condition,
    Controller,
    Decode,
    Gate,
    Loop,
    Model,
    MqttFeed,
    Node,
    Place,
    Quality,
    Scale,
    SerialPort,
    Signal,
    Source,
    TimeField,
    Tls,
    Tolerance,
)

ALPHABET = "abcXYZ019-_"
PLACE_KEY = {"csv": "column", "json": "path", "senml": "name"}

names = st.builds(str.__add__, st.sampled_from("abN7"), st.text(ALPHABET, max_size=6))
texts = st.text(
    st.characters(exclude_categories=["C", "Z"]) | st.just(" "), min_size=1, max_size=8
)  # whatever is printable
numbers = st.floats(-1e9, 1e9)
positive = st.floats(1e-6, 1e6)
waits = st.floats(0, 1e6)
pairs = st.tuples(numbers, numbers).filter(lambda pair: pair[0] < pair[1])
percents = st.floats(0.01, 1000)
flags = st.booleans()
maybe_text = st.none() | texts

brokers = st.builds(
    Broker,
    host=texts,
    port=st.integers(1, 65535),
    prefix=st.sampled_from(["rtid", "plant/rtid"]),
    username=texts,
    password_file=maybe_text,
    tls=st.none() | st.builds(Tls, ca_file=maybe_text) | st.builds(Tls, cert_file=texts, key_file=texts),
)
tolerances = st.builds(
    Tolerance, gain_pct=percents, time_constant_pct=percents, dead_time_pct=percents, noise_pct=percents
)
budgets = st.builds(AlarmBudget, false_alarms=positive, per_days=positive)
alarm_settings = st.builds(
    AlarmSetting,
    priority=st.sampled_from(["high", "medium", "low"]),
    on_delay_s=waits,
    off_delay_s=waits,
    latching=flags,
)
controllers = st.builds(
    Controller,
    kp=numbers,
    ti_s=st.none() | positive,
    td_s=waits,
    form=st.sampled_from(["ideal", "series", "parallel"]),
    action=st.sampled_from([None, "reverse", "direct"]),
    period_s=st.none() | positive,
    filter_s=waits,
    input_span=st.none() | positive,
    output_span=st.none() | positive,
)


@st.composite
def models(draw: st.DrawFn, period_s: float) -> Model:
    least = draw(st.floats(0, 9000)) * period_s
    structure: Any = draw(st.sampled_from(["output_error", "equation_error"]))
    most = least + draw(st.floats(0, 999)) * period_s
    return Model(structure, order=draw(st.sampled_from([1, 2])), dead_time_s=(least, most))


@st.composite
def places(draw: st.DrawFn, decode: str, topic: str | None = None) -> Place:
    if decode == "plain":
        return Place(topic=topic)
    value: Any = draw(st.integers(0, 1000) if decode == "csv" else texts)
    return Place(topic=topic, **{PLACE_KEY[decode]: value})


@st.composite
def signals(draw: st.DrawFn, name: str, decode: str, topic: str | None) -> Signal:
    quality: st.SearchStrategy[Quality | None] = st.none()
    if decode != "plain":
        quality |= st.builds(Quality, place=places(decode), good=flags | numbers | texts)
    return Signal(
        name=name,
        place=draw(places(decode, topic)),
        unit=draw(st.just("") | texts),
        limits=draw(st.none() | pairs),
        plausible=draw(st.none() | pairs),
        resolution=draw(st.none() | positive),
        scale=draw(st.none() | st.builds(Scale, raw=pairs, value=pairs)),
        quality=draw(quality),
    )


@st.composite
def sources(draw: st.DrawFn, name: str) -> Source:
    """A source with two or three signals; its name makes its serial port unique."""
    mqtt = draw(flags)
    decodes: tuple[Decode, ...] = ("csv", "json", "senml", "plain") if mqtt else ("csv", "json", "senml")
    decode = draw(st.sampled_from(decodes))
    own = draw(st.lists(names, min_size=2, max_size=3, unique=True))
    topics = [f"plant/{signal}/x" if mqtt and (decode == "plain" or draw(flags)) else None for signal in own]
    timed = decode in {"csv", "json"} and draw(flags)
    serial = st.builds(
        SerialPort,
        port=st.just(f"/dev/{name}"),
        baud=st.integers(50, 4_000_000),
        byte_size=st.sampled_from([5, 6, 7, 8]),
        parity=st.sampled_from(["none", "even", "odd"]),
        stop_bits=st.sampled_from([1, 2]),
    )
    unit = st.sampled_from(["s", "ms", "us", "ns"])
    return Source(
        name=name,
        decode=decode,
        signals=tuple(draw(signals(f"{name}.{s}", decode, t)) for s, t in zip(own, topics, strict=True)),
        serial=None if mqtt else draw(serial),
        mqtt=MqttFeed(draw(st.sampled_from(["plant/#", "plant/+/x"])), draw(st.integers(0, 2))) if mqtt else None,
        time=draw(st.builds(TimeField, place=places(decode), unit=unit)) if timed else None,
        checksum="none" if mqtt else draw(st.sampled_from(["none", "xor8", "crc16"])),
    )


@st.composite
def gates(draw: st.DrawFn, known: list[str]) -> Gate:
    test = st.sampled_from(["above", "below", "equals"])
    each = st.builds(lambda s, t, v: Condition(s, **{t: v}), st.sampled_from(known), test, numbers)
    return Gate(tuple(draw(st.lists(each, min_size=1, max_size=3))), draw(waits))


@st.composite
def loops(draw: st.DrawFn, name: str, source: Source, every_s: float) -> Loop:
    """A loop on the signals of one source."""
    known = {signal.name: signal for signal in source.signals}
    first, second, *_ = draw(st.permutations(sorted(known)))
    period_s = draw(st.floats(1e-6, 1e3))
    loop = Loop(
        name=name,
        inputs=(first,),
        output=second,
        period_s=period_s,
        model=draw(models(period_s)),
        memory_s=draw(st.floats(period_s, 1e9)),
        stale_after_s=draw(st.floats(period_s, 1e9)),
        baseline=Baseline(after_s=draw(waits)),
        active_when=draw(st.none() | gates(sorted(known))),
        tolerance=draw(tolerances),
        alarm_budget=draw(budgets),
        alarms=draw(st.dictionaries(st.sampled_from(["plant_drift", "clock", "outliers"]), alarm_settings)),
        controller=draw(st.none() | controllers),
        publish_every_s=every_s,
    )
    own = [known[signal] for signal in loop.signals]
    return dataclasses.replace(
        loop,
        units={signal.name: signal.unit for signal in own},
        ranges={signal.name: signal.plausible for signal in own if signal.plausible},
        limits={signal.name: signal.limits for signal in own if signal.limits},
        resolutions={signal.name: signal.resolution for signal in own if signal.resolution},
    )


@st.composite
def nodes(draw: st.DrawFn) -> Node:
    every_s = draw(positive)
    feeds = {name: draw(sources(name)) for name in draw(st.lists(names, min_size=1, max_size=2, unique=True))}
    watched = draw(st.lists(names, min_size=1, max_size=2, unique=True))
    return Node(
        name=draw(names),
        sources=feeds,
        loops={n: draw(loops(n, draw(st.sampled_from(list(feeds.values()))), every_s)) for n in watched},
        state_dir=draw(texts),
        broker=draw(brokers),
        publish_every_s=every_s,
    )


def document(node: Node) -> dict[str, Any]:
    """The configuration that says what the node says, every key that has a value written out."""
    return {
        "node": node.name,
        "state_dir": node.state_dir,
        "broker": _plain(node.broker),
        "sources": {name: _source(source) for name, source in node.sources.items()},
        "loops": {name: _loop(loop) for name, loop in node.loops.items()},
        "publish": {"every_s": node.publish_every_s},
    }


def _plain(record: Any) -> Any:
    """A record as a mapping without what is None, tuples as lists."""
    if isinstance(record, dict):
        return {key: _plain(value) for key, value in record.items() if value is not None}
    if isinstance(record, tuple):
        return [_plain(value) for value in record]
    if dataclasses.is_dataclass(record) and not isinstance(record, type):
        return _plain(dataclasses.asdict(record))
    return record


def _placed(record: dict[str, Any]) -> dict[str, Any]:
    """A mapping whose place stands among its keys."""
    return {**record.pop("place"), **record}


def _source(source: Source) -> dict[str, Any]:
    written: dict[str, Any] = _plain(source)
    del written["name"]
    written["signals"] = {each["name"].partition(".")[2]: _signal(each) for each in written["signals"]}
    if "time" in written:
        written["time"] = _placed(written["time"])
    if source.mqtt:
        del written["checksum"]
    return written


def _signal(written: dict[str, Any]) -> dict[str, Any]:
    del written["name"]
    if not written["unit"]:
        del written["unit"]
    if "quality" in written:
        written["quality"] = _placed(written["quality"])
    return _placed(written)


def _loop(loop: Loop) -> dict[str, Any]:
    written: dict[str, Any] = _plain(loop)
    for key in ("name", "units", "ranges", "limits", "resolutions", "publish_every_s"):
        del written[key]
    if loop.active_when:
        conditions = written["active_when"].pop("conditions")
        written["active_when"] |= {"all": conditions} if len(conditions) > 1 else conditions[0]
    return written
