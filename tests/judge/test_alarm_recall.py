"""A book that is told the events of another one stands where that one stands, and says nothing itself."""

from __future__ import annotations

import random

import pytest

from rtid.judge.alarms import AlarmBook, Finding
from rtid.settings import AlarmSetting

SETTINGS = {
    "plant_drift": AlarmSetting(latching=True),
    "data_gap": AlarmSetting(),
    "out_of_range": AlarmSetting(on_delay_s=2.0, off_delay_s=3.0),
}
SIGNALS = {"out_of_range": "drive.speed"}


def step(book: AlarmBook, chance: random.Random, time_s: float) -> None:
    """One thing that may happen to an alarm."""
    alarm = chance.choice(list(SETTINGS))
    signal, when = SIGNALS.get(alarm), {"time_s": time_s, "stamp": time_s}
    deed = chance.choice(["present", "present", "absent", "absent", "ack", "shelve", "unshelve", "withdraw", "wait"])
    if deed in ("present", "absent"):
        finding = Finding(deed == "present", f"text {time_s:g}", chance.choice(["gain", "dead_time"]), 5.0, 4.0, 6.0)
        book.note(alarm, finding, signal=signal, **when)
    elif deed == "ack" and (alarm, signal) not in [entry[:2] for entry in book.shelved()]:
        book.acknowledge(alarm, by="Kim", signal=signal, **when)
    elif deed == "shelve":
        book.shelve(alarm, signal=signal, until_s=time_s + chance.uniform(1.0, 20.0), by="Kim", **when)
    elif deed == "unshelve":
        book.unshelve(alarm, signal=signal, by="Kim", **when)
    elif deed == "withdraw":
        book.withdraw((alarm,), **when)
    book.end_shelvings(**when)


@pytest.mark.parametrize("seed", range(40))
def test_a_recalled_book_stands_where_the_other_one_stands(seed: int) -> None:
    chance, book, recalled = random.Random(seed), AlarmBook(SETTINGS), AlarmBook(SETTINGS)
    told = 0
    for tick in range(200):
        step(book, chance, float(tick))
        for event in book.take_transitions():
            recalled.recall(event)
            told += 1
        assert standing(recalled) == standing(book)
        assert shelved(recalled) == shelved(book)
    assert recalled.take_transitions() == ()
    assert told > 50


def standing(book: AlarmBook) -> list[tuple[object, ...]]:
    return sorted((a.alarm, a.signal, a.text, a.quantity, a.priority) for a in book.active())


def shelved(book: AlarmBook) -> list[tuple[str, str | None, float]]:
    return sorted((alarm, signal, round(until_s, 6)) for alarm, signal, until_s in book.shelved())
