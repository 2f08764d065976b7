"""What a person reads: one line each, no hole of a template, with numbers, units and the caution."""

from __future__ import annotations

import re
from collections.abc import Iterator

import pytest

from rtid.judge import wording
from rtid.judge.change import QuantityChange
from rtid.judge.health import health_of
from rtid.model.quantities import names_of

JUDGED = sorted({*names_of(1, 1), *names_of(2, 1)} - {"offset", "noise"})
STAMP = 1_767_225_600.25


def change(name: str, pct: float = -21.34) -> QuantityChange:
    return QuantityChange(name, pct, pct - 2.0, pct + 2.0, 10.0, 9.0)


def texts() -> Iterator[str]:
    for name in JUDGED:
        yield wording.drift_text(change(name), STAMP)
        yield wording.shift_text(change(name, 3.0), STAMP)
    yield wording.shift_text(None, STAMP)
    yield wording.blind_text(None, 10.0)
    yield wording.blind_text(23.4, 10.0)
    yield wording.gap_text(12.5)
    yield wording.restart_text()
    yield wording.stale_text(7.25)
    yield wording.unchanged_text(STAMP, provisional=False)
    yield wording.unchanged_text(STAMP, provisional=True)
    for state in ("waiting", "learning", "held", "inactive", "stale"):
        yield health_of(state, (), detail="", unchanged="")[1]


@pytest.mark.parametrize("text", list(texts()))
def test_one_line_without_holes(text: str) -> None:
    assert text.strip() == text != ""
    assert not re.search(r"[\n\r\t{}_]|\bNone\b|\bnan\b|\binf\b|  ", text)


@pytest.mark.parametrize("name", JUDGED)
def test_drift_text_says_what_how_much_since_when_and_where_to_look(name: str) -> None:
    text = wording.drift_text(change(name), STAMP)
    assert text.startswith(f"{wording.quantity_name(name)} is 21.3 % below the baseline (95 % limits -23.3 … -19.3 %)")
    assert "tolerance of 10 %" in text
    assert "2026-01-01 00:00 UTC" in text
    assert "Look first at" in text
    assert text.endswith(wording.CAUTION)


def test_caution_tells_to_isolate_and_that_this_is_no_safety_function() -> None:
    assert "isolate and lock" in wording.CAUTION
    assert "no safety function" in wording.CAUTION


def test_a_rise_is_above_and_a_fall_is_below() -> None:
    assert "gain is 12.0 % above the baseline" in wording.shift_text(change("gain", 12.0), STAMP)
    assert "gain is 12.0 % below the baseline" in wording.shift_text(change("gain", -12.0), STAMP)


def test_an_undecided_shift_names_no_quantity() -> None:
    text = wording.shift_text(None, STAMP)
    assert "not decided yet" in text
    assert not any(wording.quantity_name(name) in text for name in JUDGED)


def test_blindness_is_no_fault_of_the_plant() -> None:
    assert "23 % or more would be seen, the tolerance is 10 %" in wording.blind_text(23.4, 10.0)
    assert "no gain change would be seen" in wording.blind_text(None, 10.0)
    assert "Nothing is wrong with the plant" in wording.blind_text(None, 10.0)


def test_durations_have_their_unit() -> None:
    assert "12.5 s" in wording.gap_text(12.5)
    assert "7.25 s" in wording.stale_text(7.25)


def test_unchanged_is_all_that_good_health_says() -> None:
    plain = wording.unchanged_text(STAMP, provisional=False)
    assert plain == "unchanged since the baseline of 2026-01-01 00:00 UTC"
    provisional = wording.unchanged_text(STAMP, provisional=True)
    assert provisional == f"{plain} (provisional: the false-alarm budget is not promised yet)"
