"""Readings per second, by a clock that the test turns."""

from __future__ import annotations

import pytest

from rtid.service.rates import Rate


def test_in_the_first_second_it_is_not_known() -> None:
    rate = Rate()
    assert rate.per_s(0, 0.0) is None
    rate.note(0, 0.0)
    assert rate.per_s(50, 0.5) is None
    assert rate.per_s(100, 1.0) == pytest.approx(100.0)


def test_it_is_that_of_the_last_ten_seconds() -> None:
    rate = Rate()
    for tenth in range(400):  # 20 s at 100 a second, then 20 s at 10 a second
        now = tenth / 10.0
        rate.note(round(min(now, 20.0) * 100 + max(now - 20.0, 0.0) * 10), now)
    assert rate.per_s(2200, 40.0) == pytest.approx(10.0, rel=0.05)


def test_after_a_pause_of_the_worker_it_is_not_known_again() -> None:
    rate = Rate()
    rate.note(0, 0.0)
    assert rate.per_s(100, 60.0) is None
