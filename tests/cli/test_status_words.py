"""What `status` and `watch` print of a document: worst first, within 80 columns, nothing left out that matters."""

from __future__ import annotations

from typing import Any, get_args

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtid.cli.status import in_words
from rtid.cli.status_words import span, worst_first
from rtid.cli.watch import table
from rtid.report import Health

TIME = "2026-01-01T00:00:00.000Z"
ALARM = {"alarm": "plant_drift", "signal": None, "priority": "medium", "since": TIME, "acknowledged": False, "text": ""}


def loop(**change: Any) -> dict[str, Any]:
    return {
        "state": "watching",
        "health": "good",
        "since": TIME,
        "reason": "unchanged since the baseline of 2026-01-01 00:00 UTC",
        "progress": None,
        "samples": 1000,
        "blocks": 63,
        "last_block_age_s": 0.2,
        "last_informative": TIME,
        "last_informative_age_s": 3.0,
        "drift_ratio": 0.2,
        "worst_quantity": "gain",
        "change_pct": -1.0,
        "low_pct": -2.0,
        "high_pct": 0.0,
        "detectable_gain_pct": 3.0,
        "quantities": {},
        "baseline": "belt-1",
        "rejected": {},
        "alarms": [],
        "shelved": [],
        "hold": None,
    } | change


def source(**change: Any) -> dict[str, Any]:
    return {
        "from": "serial port /dev/x, 115200 baud",
        "connected": True,
        "rate_per_s": 99.8,
        "messages": 100,
        "readings": 100,
        "dropped": 0,
        "retained": 0,
        "reconnects": 0,
        "rejected": {},
        "first_rejected": {},
        "last_message_age_s": 0.1,
        "skew_s": {},
    } | change


def document(loops: dict[str, Any], sources: dict[str, Any] | None = None, **change: Any) -> dict[str, Any]:
    return {
        "time": TIME,
        "node": "hall",
        "version": "0.1.0",
        "uptime_s": 10.0,
        "state_dir": "state",
        "events": {"sequence": 17, "unwritten": 0},
        "broker": None,
        "loops": loops,
        "sources": sources or {},
    } | change


def words(found: dict[str, Any]) -> str:
    return " ".join(" ".join(in_words(found)).split())


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (0.04, "0.0 s"),
        (9.94, "9.9 s"),
        (119.0, "119 s"),
        (120.0, "2 min"),
        (7199.0, "119 min"),
        (7200.0, "2 h 0 min"),
        (172799.0, "47 h 59 min"),
        (180000.0, "2 d 2 h"),
    ],
)
def test_a_length_of_time(seconds: float, text: str) -> None:
    assert span(seconds) == text


def test_the_worst_comes_first_then_the_one_that_drifts_most() -> None:
    loops = {health: loop(health=health) for health in get_args(Health)}
    assert [name for name, _ in worst_first(loops)] == list(get_args(Health))[::-1]
    drifting = {"a": loop(drift_ratio=None), "b": loop(drift_ratio=0.5), "c": loop(drift_ratio=0.9), "d": loop()}
    assert [name for name, _ in worst_first(drifting)] == ["c", "b", "d", "a"]


def test_a_loop_that_drifts() -> None:
    said = words(
        document(
            {
                "belt": loop(
                    health="maintenance_required",
                    reason="gain is 21.3 % below",
                    drift_ratio=4.2,
                    change_pct=-21.3,
                    low_pct=-24.0,
                    high_pct=-18.5,
                    alarms=[ALARM],
                )
            }
        )
    )
    for part in (
        "loop belt: maintenance_required, watching since 2026-01-01 00:00 UTC",
        "reason gain is 21.3 % below",
        "drift 4.20 of its threshold; worst gain -21.3 % (95 % limits -24.0 … -18.5 %)",
        "sees a change of gain of 3.0 % or more",
        "alarm plant_drift, medium, since 2026-01-01 00:00 UTC, not acknowledged",
        "last block 0.2 s ago, last informative 3.0 s ago",
    ):
        assert part in said


def test_what_people_did_is_said_with_its_end() -> None:
    shelved = [{"alarm": "saturated", "signal": "drive.volts", "until": TIME}]
    said = words(document({"belt": loop(hold={"by": "Kim", "until": TIME}, shelved=shelved)}))
    assert "held by Kim, until 2026-01-01 00:00 UTC" in said
    assert "shelved saturated of drive.volts, until 2026-01-01 00:00 UTC" in said


def test_what_learning_waits_for_is_said_once() -> None:
    unknown = dict.fromkeys(
        ("drift_ratio", "worst_quantity", "change_pct", "low_pct", "high_pct", "detectable_gain_pct", "baseline")
    )
    progress = "learning: about 6 min more of moves"
    learning = loop(state="learning", reason=progress, progress=progress, **unknown)
    stale = loop(state="stale", reason="no reading", progress=progress, **unknown)
    assert words(document({"belt": learning})).count(progress) == 1
    assert f"baseline {progress}" in words(document({"belt": stale}))


def test_what_a_source_lost() -> None:
    said = words(
        document(
            {},
            {
                "drive": source(
                    connected=False,
                    rate_per_s=None,
                    last_message_age_s=None,
                    dropped=2,
                    reconnects=1,
                    rejected={"checksum": 3},
                    first_rejected={"checksum": "1,2,3*00"},
                    skew_s={"a": 0.0, "b": 0.25},
                )
            },
        )
    )
    for part in (
        "source drive: NOT CONNECTED, rate not known yet",
        "last message never",
        "besides 2 dropped, 1 reconnects",
        "rejected 3 checksum; the first: 1,2,3*00",
        "later b by 0.25 s",
    ):
        assert part in said
    assert "later a" not in said


def test_the_node_its_events_and_its_broker() -> None:
    broker = {"address": "h:1883", "connected": False, "sent": 5, "failed": 1, "dropped": 0, "held": 3}
    said = words(document({}, broker=broker, events={"sequence": 17, "unwritten": 2}))
    assert said.startswith("node hall: rtid 0.1.0, up 10 s")
    assert "events 17; 2 wait for the disk" in said
    assert "broker h:1883, not connected, 5 messages sent, 1 failed" in said


def test_the_table_of_watch() -> None:
    lines = table(document({"a": loop(), "b": loop(health="failure", alarms=[ALARM])}, {"drive": source()}))
    assert lines[0] == "node hall  00:00:00 UTC  up 10 s  17 events"
    assert [line.split()[0] for line in lines[1:4]] == ["LOOP", "b", "a"]
    assert lines[3].split() == ["a", "watching", "good", "0.20", "gain", "-1.0", "%"]
    assert lines[4:] == [
        "alarm b: plant_drift, medium, since 2026-01-01 00:00 UTC",
        "source drive: connected, 99.8 readings/s",
    ]


@given(
    name=st.from_regex(r"[A-Za-z0-9_-]{1,64}", fullmatch=True),
    reason=st.text(st.characters(codec="ascii", exclude_categories=["Cc"]), max_size=400),
    width=st.integers(1, 120),
    found=st.builds(
        loop,
        change_pct=st.floats(-1e6, 1e6) | st.none(),
        drift_ratio=st.floats(0, 1e6) | st.none(),
        worst_quantity=st.sampled_from(["natural_frequency", "undecided"]) | st.none(),
        alarms=st.lists(st.just(ALARM | {"signal": "s" * 60 + "." + "t" * 60}), max_size=2),
    ),
)
def test_no_line_is_wider_than_the_terminal(name: str, reason: str, width: int, found: dict[str, Any]) -> None:
    told = document({name: found | {"reason": reason}}, {name: source()})
    assert all(len(line) <= width for line in table(told, width))
    assert all(len(line) <= 80 for line in in_words(told) if not line.startswith(("loop ", "source ")))
