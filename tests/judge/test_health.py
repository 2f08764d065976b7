"""Health is derived from state and alarms; it is good only while a loop watches and no alarm stands."""

from __future__ import annotations

from typing import get_args

import pytest

from rtid.judge.health import health_of
from rtid.report import ActiveAlarm, Health, State
from rtid.settings import DEFAULT_ALARMS

UNCHANGED = "unchanged since the baseline of 2026-01-01 00:00 UTC"
STATES: dict[State, Health] = {
    "waiting": "function_check",
    "learning": "function_check",
    "held": "function_check",
    "inactive": "function_check",
    "stale": "failure",
}
ALARMS: dict[str, Health] = {
    "estimate_invalid": "failure",
    "data_stale": "failure",
    "frozen_signal": "failure",
    "cannot_judge": "function_check",
    "out_of_range": "out_of_specification",
    "saturated": "out_of_specification",
    "outliers": "out_of_specification",
    "timing": "out_of_specification",
    "plant_drift": "maintenance_required",
    "plant_shift": "maintenance_required",
    "noise_change": "maintenance_required",
    "oscillation": "maintenance_required",
}


def alarm(name: str, text: str = "") -> ActiveAlarm:
    return ActiveAlarm(name, "low", 0.0, text or f"text of {name}")


def health(state: State, *alarms: ActiveAlarm, detail: str = "") -> tuple[Health, str]:
    return health_of(state, alarms, detail=detail, unchanged=UNCHANGED)


def test_good_only_while_watching_without_alarms_and_in_the_words_of_the_contract() -> None:
    assert health("watching") == ("good", UNCHANGED)


def test_every_state_is_in_the_table() -> None:
    assert {*STATES, "watching"} == set(get_args(State))


@pytest.mark.parametrize(("state", "expected"), list(STATES.items()))
@pytest.mark.parametrize("name", [None, *DEFAULT_ALARMS])
def test_every_other_state_rules_whatever_alarm_stands(state: State, expected: Health, name: str | None) -> None:
    found, reason = health(state, *([alarm(name)] if name else []))
    assert found == expected
    assert reason.startswith(state)


@pytest.mark.parametrize("state", STATES)
def test_the_state_may_say_more(state: State) -> None:
    assert health(state, detail="about 40 s more of moves")[1] == "about 40 s more of moves"


@pytest.mark.parametrize(("name", "expected"), list(ALARMS.items()))
def test_an_alarm_decides_while_watching_and_gives_the_reason(name: str, expected: Health) -> None:
    assert health("watching", alarm(name)) == (expected, f"text of {name}")


@pytest.mark.parametrize("name", DEFAULT_ALARMS)
def test_no_alarm_leaves_a_good_health(name: str) -> None:
    assert health("watching", alarm(name))[0] != "good"


def test_the_worst_alarm_decides_whatever_the_order() -> None:
    names = ["plant_drift", "saturated", "cannot_judge", "frozen_signal"]
    for last in range(len(names), 0, -1):
        standing = [alarm(name) for name in names[:last]]
        expected = (ALARMS[names[last - 1]], f"text of {names[last - 1]}")
        assert health("watching", *standing) == health("watching", *reversed(standing)) == expected
