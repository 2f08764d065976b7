"""Each format through the one decoder, and whatever bytes there are: readings or refusals, nothing else."""

from __future__ import annotations

import json
import math
from typing import Any

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from rtid.intake.decode import MAX_PAYLOAD, Decoder
from rtid.intake.reading import Reading
from rtid.settings import Place, Quality, Scale, Source, TimeField
from tests.support.sources import signal, source

DRIVE = source(
    "csv",
    signal("drive.volts", column=1),
    signal("drive.speed", column=2, scale=Scale(raw=(0, 100), value=(0, 1))),
    time=TimeField(Place(column=0), "ms"),
)
HALL = source(
    "json",
    signal("hall.valve", path="valve"),
    signal("hall.temp", path="sensors.0.supply", quality=Quality(Place(path="sensors.0.ok"), good=True)),
    time=TimeField(Place(path="t"), "s"),
)
PLAIN = source("plain", signal("hall.valve", topic="hall/valve"), signal("hall.temp", topic="hall/+/temp"))
SENML = source("senml", signal("meter.volts", name="urn:dev:1:volts"), signal("meter.run", name="urn:dev:1:run"))


def values(of: Source, payload: bytes, **more: Any) -> dict[str, float]:
    """What the one reading of the payload holds; every value must have been accepted."""
    readings, problems = Decoder(of).decode(payload, arrival=7.0, **more)
    assert problems == []
    return dict(readings[0].values)


def kinds(of: Source, payload: bytes, **more: Any) -> tuple[list[str], list[str]]:
    """Names of the signals that came through, and the kinds of what did not."""
    readings, problems = Decoder(of).decode(payload, arrival=7.0, **more)
    return [name for reading in readings for name in reading.values], [problem.kind for problem in problems]


def test_csv_line_with_payload_time_and_scale() -> None:
    readings, problems = Decoder(DRIVE).decode(b"1500, 12.5,\t50", arrival=7.0)
    assert problems == []
    assert readings == [Reading("drive", 1.5, {"drive.volts": 12.5, "drive.speed": 0.5}, 7.0)]


def test_without_payload_time_the_arrival_counts() -> None:
    readings, _ = Decoder(source("csv", signal("drive.volts", column=0))).decode(b"3", arrival=7.0)
    assert readings[0].time == readings[0].arrival == 7.0


@pytest.mark.parametrize(
    ("payload", "passed", "refused"),
    [
        (b"1500,12.5", [], ["columns"]),
        (b"", [], ["columns"]),
        (b"1500,12.5,1_0", ["drive.volts"], ["number"]),
        (b"1500,,3", ["drive.speed"], ["missing"]),
        (b"x,12.5,3", [], ["time"]),
        (b",12.5,3", [], ["time"]),
        (b"1500,12.5\xff,3", [], ["garbled"]),
        (b"1500,12.5,\x003", [], ["garbled"]),
        (b"1500,12.5,\xd9\xa1", [], ["garbled"]),
        (b"1500,1e400,nan", [], ["number", "number"]),
    ],
)
def test_csv_line_that_is_not_right(payload: bytes, passed: list[str], refused: list[str]) -> None:
    assert kinds(DRIVE, payload) == (passed, refused)


def test_csv_time_may_be_iso_text() -> None:
    readings, _ = Decoder(DRIVE).decode(b"1970-01-01T00:00:02Z,1,2,and more", arrival=7.0)
    assert readings[0].time == 2.0


def test_csv_quality_column() -> None:
    checked = source("csv", signal("drive.volts", column=0, quality=Quality(Place(column=1), good="OK")))
    assert values(checked, b"5,OK") == {"drive.volts": 5.0}
    assert kinds(checked, b"5,BAD") == ([], ["quality"])


def test_checksum_is_taken_off_before_decoding() -> None:
    checked = source("csv", signal("drive.volts", column=0), checksum="crc16")
    assert values(checked, b"123456789*29B1") == {"drive.volts": 123456789.0}
    assert kinds(checked, b"123456780*29B1") == ([], ["checksum"])


def test_json_paths_reach_into_objects_and_lists() -> None:
    payload = b'{"t": 3, "valve": true, "sensors": [{"supply": 21.5, "ok": true}]}'
    assert values(HALL, payload) == {"hall.valve": 1.0, "hall.temp": 21.5}


def test_json_time_may_be_rfc_3339_text() -> None:
    readings, _ = Decoder(HALL).decode(b'{"t": "1970-01-01T00:00:03Z", "valve": 5}', arrival=7.0)
    assert readings[0].time == 3.0


@pytest.mark.parametrize(
    ("payload", "passed", "refused"),
    [
        (b'{"t": 3, "valve": 5}', ["hall.valve"], ["missing"]),
        (b'{"t": 3, "valve": 5, "sensors": [{"supply": 2, "ok": false}]}', ["hall.valve"], ["quality"]),
        (b'{"t": 3, "valve": 5, "sensors": [{"supply": 2}]}', ["hall.valve"], ["missing"]),
        (b'{"t": 3, "valve": NaN, "sensors": [{"supply": 1e400, "ok": 1}]}', [], ["number", "number"]),
        (b'{"t": 3, "valve": null, "sensors": {}}', [], ["missing", "missing"]),
        (b'{"t": 3, "valve": "5", "sensors": [{"supply": [], "ok": 1}]}', [], ["number", "number"]),
        (b'{"valve": 5}', [], ["time"]),
        (b'{"t": true, "valve": 5}', [], ["time"]),
        (b'{"t": 3, "valve": 5, "valve": 6}', [], ["json"]),
        (b"[" * 60000, [], ["json"]),
        (b'{"t":' * 10000, [], ["json"]),
        (b"\xff\xfe", [], ["json"]),
        (b"", [], ["json"]),
        (b"7", [], ["time"]),
        (b'{"t": 3, "valve": ' + b"9" * 6000 + b"}", [], ["number", "missing"]),
        (b" " * (MAX_PAYLOAD + 1), [], ["length"]),
    ],
)
def test_json_message_that_is_not_right(payload: bytes, passed: list[str], refused: list[str]) -> None:
    assert kinds(HALL, payload) == (passed, refused)


def test_refusal_names_the_signal_and_what_was_there() -> None:
    _, problems = Decoder(DRIVE).decode(b"1500,12.5,abc", arrival=7.0)
    assert problems[0].text == "drive.speed: 'abc' is text, not a number"


def test_plain_number_belongs_to_the_signal_of_its_topic() -> None:
    assert values(PLAIN, b" 21.5\n", topic="hall/valve") == {"hall.valve": 21.5}
    assert values(PLAIN, b"3", topic="hall/east/temp") == {"hall.temp": 3.0}
    assert kinds(PLAIN, b"open", topic="hall/valve") == ([], ["number"])


def test_message_that_no_signal_wants_is_ignored() -> None:
    assert kinds(PLAIN, b"whatever", topic="hall/light") == ([], [])


def test_signal_with_a_topic_takes_only_its_messages() -> None:
    split = source("json", signal("hall.a", path="x", topic="hall/a"), signal("hall.b", path="x"))
    assert values(split, b'{"x": 1}', topic="hall/a") == {"hall.a": 1.0, "hall.b": 1.0}
    assert values(split, b'{"x": 1}', topic="hall/c") == {"hall.b": 1.0}


KEYS = st.sampled_from(["n", "v", "t", "bn", "bt", "bv", "valve", "sensors", "x_"])
DOCUMENTS = st.recursive(
    st.none() | st.booleans() | st.floats() | st.integers() | st.text(max_size=4),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(KEYS, inner),
)
PAYLOADS = (
    st.binary(max_size=200)
    | st.text(st.sampled_from('[]{}",:.-+0123456789eE *\nbtvu_'), max_size=80).map(str.encode)
    | DOCUMENTS.map(lambda document: json.dumps(document).encode())
)


@pytest.mark.parametrize("of", [DRIVE, HALL, PLAIN, SENML], ids=lambda of: of.decode)
@given(payload=PAYLOADS)
@example(payload=b'[{"bt": 1e999, "v": 1}]')
@example(payload=b'{"t": "0001-01-01T00:00:00+14:00", "valve": 1}')
@example(payload=b"0001-01-01T00:00:00+14:00,1,2")
def test_any_bytes_give_readings_or_refusals(of: Source, payload: bytes) -> None:
    readings, problems = Decoder(of).decode(payload, arrival=7.0, topic="hall/valve")
    assert all(problem.text.isprintable() for problem in problems)
    for reading in readings:
        assert math.isfinite(reading.time)
        assert reading.values
        assert all(math.isfinite(value) for value in reading.values.values())
