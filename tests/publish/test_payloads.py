"""Every payload against its schema, and what no payload may hold."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from jsonschema import ValidationError  # type: ignore[import-untyped]

from rtid.publish import messages
from rtid.report import Drift, Quantity
from tests.support.payloads import check, check_as
from tests.support.reports import QUANTITIES, STAMP, make_report, make_transition

number = st.none() | st.floats() | st.floats(width=32).map(np.float32)


def event(**changes: Any) -> dict[str, Any]:
    return messages.event(make_transition(**changes), node="packing-2", loop="conveyor", sequence=17)


def snapshot_body() -> dict[str, Any]:
    report = make_report()
    return {
        "loop": "conveyor", "reason": "asked", "state": "watching", "region": None,
        "structure": "output_error", "order": 2, "integrating": False, "period_s": 0.01, "samples": 12000,
        "transfer": {"numerator": np.array([0.0, 0.1]), "denominator": np.array([1.0, -0.9]), "delay_samples": 3,
                     "period_s": 0.01},
        "quantities": QUANTITIES,
        "reduced": {"gain": np.float64(2.0), "time_constant_s": 0.5, "dead_time_s": math.nan},
        "parameters": {"names": ("ln_gain",), "values": np.array([0.69]), "covariance": np.array([[1e-6]])},
        "validation": {"one_step_error_pct": 3.0, "free_run_error_pct": 7.0, "whiteness_p": None,
                       "input_residual_p": 0.5},
        "information": {"detectable_gain_pct": 3.0, "last_informative": STAMP},
        "baseline": {"id": "b1", "time": STAMP, "provisional": False, "quantities": QUANTITIES},
        "change": {"gain_pct": -21.3}, "alarms": report.alarms, "caution": "Not for automatic use.",
    }  # fmt: skip


def test_every_payload_obeys_its_schema() -> None:
    report = make_report()
    check(messages.status("packing-2", stamp=STAMP, loops=["conveyor", "oven"]))
    check(messages.model(report, "packing-2"))
    check(messages.drift(report, "packing-2"))
    check(messages.health(report, "packing-2"))
    check(event())
    check(event(alarm=None, action="hold", transition=None, by="night shift"))
    check(messages.snapshot(snapshot_body(), node="packing-2", stamp=STAMP))


def test_snapshot_without_baseline_and_transfer_obeys_the_schema() -> None:
    unknown = dict.fromkeys(("order", "transfer", "reduced", "baseline"))
    nothing_yet = {"detectable_gain_pct": None, "last_informative": None}
    body = snapshot_body() | unknown | {"structure": "physical", "information": nothing_yet}
    check(messages.snapshot(body, node="packing-2", stamp=STAMP))


def test_snapshot_texts_its_stamps_and_leaves_the_body_alone() -> None:
    body = snapshot_body()
    document = messages.snapshot(body, node="packing-2", stamp=STAMP + 1.0)
    assert document["time"] == "2026-01-01T00:00:01.250Z"
    assert document["baseline"]["time"] == document["information"]["last_informative"] == "2026-01-01T00:00:00.250Z"
    assert document["alarms"][0]["since"] == "2025-12-31T23:59:00.250Z"
    assert document["reduced"]["dead_time_s"] is None
    assert body["baseline"]["time"] == STAMP


@pytest.mark.parametrize("change", [{"extra": 1}, {"time": "2026-01-01 00:00"}, {"drift_ratio": "high"}])
def test_schema_refuses_what_is_not_in_the_contract(change: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        check(messages.drift(make_report(), "packing-2") | change)


def test_event_has_either_alarm_or_action() -> None:
    with pytest.raises(ValidationError):
        check(event() | {"action": "hold"})
    assert "alarm" not in event(alarm=None, action="hold", transition=None)


def test_will_obeys_the_status_schema() -> None:
    assert messages.OFFLINE == b'{"state":"offline"}'
    check_as("status", messages.OFFLINE)


@given(value=number, ratio=number)
def test_numbers_are_finite_or_null_and_keys_stay(value: Any, ratio: Any) -> None:
    quantity = Quantity(value, value, value, value, "s")
    report = make_report(quantities={"gain": quantity}, drift=Drift(ratio, None, value, value, value, value, None))
    for make in (messages.model, messages.drift):
        payload = make(report, "packing-2")
        check(payload)
        assert payload.keys() == make(make_report(), "packing-2").keys()
    unknown = value is None or not math.isfinite(value)
    assert messages.model(report, "n")["quantities"]["gain"]["value"] == (None if unknown else float(value))


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf])
def test_bytes_with_a_number_that_is_not_finite_are_refused(bad: float) -> None:
    with pytest.raises(ValueError, match="not JSON compliant"):
        messages.dump({"value": bad})


def test_dashboard_payload_stays_below_one_kilobyte() -> None:
    longest = -1.2345678901234567e-300
    drift = Drift(longest, "natural_frequency", longest, longest, longest, longest, STAMP)
    report = make_report(loop="l" * 100, drift=drift)
    assert len(messages.dump(messages.drift(report, "n" * 100))) < 1000


@pytest.mark.parametrize(
    ("stamp", "text"),
    [
        (0.0, "1970-01-01T00:00:00.000Z"),
        (1_767_225_600.123, "2026-01-01T00:00:00.123Z"),
        (-1.5, "1969-12-31T23:59:58.500Z"),
        (1.7e15, "9999-12-31T23:59:59.000Z"),
        (-1.7e15, "0001-01-01T00:00:00.000Z"),
    ],
)
def test_stamp_text(stamp: float, text: str) -> None:
    assert messages.stamp_text(stamp) == text
