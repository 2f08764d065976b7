from __future__ import annotations

import pytest

from rtid.intake.skew import Skew


def test_median_lateness_against_the_first_topic_heard() -> None:
    skew = Skew()
    for i in range(10):
        skew.note("a", float(i))
        skew.note("b", i + (0.2 if i else 0.9))
    assert skew.medians() == {"a": 0.0, "b": pytest.approx(0.2)}


def test_only_the_last_fifty_count() -> None:
    skew = Skew()
    for i in range(100):
        skew.note("a", float(i))
        skew.note("b", i + (0.5 if i < 50 else 0.1))
    assert skew.medians()["b"] == pytest.approx(0.1)


def test_named_reference_is_waited_for() -> None:
    skew = Skew("a")
    skew.note("b", 1.0)
    assert skew.medians() == {}
    skew.note("a", 2.0)
    skew.note("b", 2.5)
    assert skew.medians() == {"a": 0.0, "b": 0.5}


def test_topics_without_number_take_no_memory() -> None:
    skew = Skew("a")
    skew.note("a", 0.0)
    for i in range(1000):
        skew.note(f"b/{i}", 1.0)
    assert len(skew.medians()) == 256
