"""SenML after RFC 8428."""

from __future__ import annotations

import json
from typing import Any

import pytest

from rtid.intake.decode import Decoder
from rtid.intake.reading import Reading
from rtid.settings import Place, Quality
from tests.support.sources import signal, source

BASE = "urn:dev:ow:10e2073a0108006:"
METER = source("senml", signal("meter.volts", name=f"{BASE}voltage"), signal("meter.amps", name=f"{BASE}current"))


def decode(pack: Any, of: Any = METER) -> tuple[list[Reading], list[str]]:
    readings, problems = Decoder(of).decode(json.dumps(pack).encode(), arrival=50.0)
    return readings, [problem.kind for problem in problems]


def test_example_of_the_rfc() -> None:
    """RFC 8428, section 5.1.2: seven records over five seconds, absolute base time."""
    pack = [{"bn": BASE, "bt": 1.276020076001e9, "bu": "A", "bver": 5, "n": "voltage", "u": "V", "v": 120.1}]
    pack += [{"n": "current", "t": t, "v": v} for t, v in [(-5, 1.2), (-4, 1.3), (-3, 1.4), (-2, 1.5), (-1, 1.6)]]
    pack += [{"n": "current", "v": 1.7}]
    readings, problems = decode(pack)
    assert problems == []
    assert [reading.time for reading in readings] == pytest.approx([1276020071.001 + i for i in range(6)], abs=1e-6)
    assert [reading.values.get("meter.amps") for reading in readings] == [1.2, 1.3, 1.4, 1.5, 1.6, 1.7]
    assert readings[-1].values == {"meter.volts": 120.1, "meter.amps": 1.7}


def test_time_below_two_to_the_28_is_relative_to_the_arrival() -> None:
    readings, _ = decode([{"bn": BASE, "n": "voltage", "t": -2, "v": 1}, {"n": "current", "v": 2}])
    assert [reading.time for reading in readings] == [48.0, 50.0]
    readings, _ = decode([{"bn": BASE, "n": "voltage", "t": 2**28, "v": 1}])
    assert readings[0].time == 2**28


def test_base_value_is_added_and_a_later_base_replaces_the_earlier() -> None:
    readings, _ = decode([{"bn": BASE, "bv": 100, "n": "voltage", "v": 20}, {"bv": 1, "n": "current", "v": 0.5}])
    assert readings[0].values == {"meter.volts": 120.0, "meter.amps": 1.5}


def test_boolean_value_is_one_or_zero() -> None:
    readings, _ = decode([{"bn": BASE, "n": "voltage", "vb": True}])
    assert readings[0].values == {"meter.volts": 1.0}


def test_text_record_may_carry_the_quality() -> None:
    checked = source("senml", signal("m.x", name="x", quality=Quality(Place(name="q"), good="good")))
    assert decode([{"n": "x", "v": 1}, {"n": "q", "vs": "good"}], checked)[0][0].values == {"m.x": 1.0}
    assert decode([{"n": "x", "v": 1}, {"n": "q", "vs": "bad"}], checked) == ([], ["quality"])
    assert decode([{"n": "x", "v": 1}], checked) == ([], ["quality"])


def test_sums_and_other_names_are_no_samples() -> None:
    assert decode([{"bn": BASE, "n": "voltage", "s": 5}, {"n": "other", "v": 1}]) == ([], ["missing"])


def test_value_that_is_not_finite_costs_its_own_signal() -> None:
    payload = b'[{"bn": "%s", "n": "voltage", "v": 1e400}, {"n": "current", "v": 2}]' % BASE.encode()
    readings, problems = Decoder(METER).decode(payload, arrival=50.0)
    assert readings[0].values == {"meter.amps": 2.0}
    assert [problem.kind for problem in problems] == ["number"]


@pytest.mark.parametrize(
    "pack",
    [
        {"n": "voltage", "v": 1},
        [1],
        [{"n": 5, "v": 1}],
        [{"bn": None, "v": 1}],
        [{"n": "voltage", "v": "1"}],
        [{"n": "voltage", "v": 1, "t": "now"}],
        [{"n": "voltage", "v": 1, "bver": 11}],
        [{"n": "voltage", "v": 1, "bver": True}],
        [{"n": "voltage", "v": 1, "must_": 1}],
        [{"n": "voltage", "v": 1}, {"must_": 1}],
    ],
)
def test_pack_that_breaks_the_rules_is_refused_whole(pack: Any) -> None:
    assert decode(pack) == ([], ["senml"])


def test_time_that_is_not_finite_is_refused() -> None:
    readings, problems = Decoder(METER).decode(b'[{"n": "voltage", "v": 1, "t": 1e999}]', arrival=50.0)
    assert (readings, problems[0].kind) == ([], "time")
