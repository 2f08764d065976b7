"""The outbox without a network: what is kept, what is sent again, what is dropped."""

from __future__ import annotations

import threading

from rtid.publish.outbox import ALARMS, WINDOW, Outbox, Outgoing


def value(topic: str, number: int, *, retain: bool = True) -> Outgoing:
    return Outgoing(topic, str(number).encode(), retain=retain)


def alarm(topic: str, number: int) -> Outgoing:
    return Outgoing(topic, str(number).encode(), qos=1, every=True)


def drain(outbox: Outbox) -> list[tuple[str, int]]:
    """Everything that is due, as the publishing thread would send it."""
    outbox.finish()
    taken = []
    while (message := outbox.take()) is not None:
        taken.append((message.topic, int(message.payload)))
        outbox.sent()
    return taken


def test_latest_value_per_topic_while_shut() -> None:
    outbox = Outbox()
    for number in range(1000):
        outbox.put(value("a", number))
        outbox.put(value("b", -number))
    assert len(outbox) == 4
    outbox.open()
    assert drain(outbox) == [("a", 999), ("b", -999)]


def test_nothing_is_handed_out_while_shut() -> None:
    outbox = Outbox()
    outbox.put(value("a", 1))
    assert drain(outbox) == []


def test_retained_values_are_due_again_after_each_connection_and_others_are_not() -> None:
    outbox = Outbox()
    outbox.put(value("kept", 1))
    outbox.put(value("once", 2, retain=False))
    outbox.open()
    assert sorted(drain(outbox)) == [("kept", 1), ("once", 2)]
    outbox.shut()
    outbox.open()
    assert drain(outbox) == [("kept", 1)]


def test_each_alarm_message_is_sent_in_order_and_before_the_values() -> None:
    outbox = Outbox()
    outbox.open()
    outbox.put(value("v", 0))
    for number in (1, 2, 3):
        outbox.put(alarm("a", number))
    assert drain(outbox) == [("a", 1), ("a", 2), ("a", 3), ("v", 0)]
    assert outbox.dropped == 0


def test_latest_alarm_is_kept_when_the_connection_goes_and_the_others_are_counted() -> None:
    outbox = Outbox()
    outbox.open()
    outbox.put(alarm("a", 1))
    outbox.put(alarm("a", 2))
    outbox.shut()
    outbox.put(alarm("a", 3))
    outbox.put(alarm("b", 4))
    outbox.open()
    assert sorted(drain(outbox)) == [("a", 3), ("b", 4)]
    assert outbox.dropped == 2


def test_an_older_alarm_never_follows_a_newer_one() -> None:
    outbox = Outbox()
    outbox.put(alarm("a", 1))
    outbox.open()
    outbox.put(alarm("a", 2))
    assert drain(outbox) == [("a", 2)]


def test_flood_of_alarms_is_bounded_and_counted() -> None:
    outbox = Outbox()
    outbox.open()
    for number in range(ALARMS + 10):
        outbox.put(alarm("a", number))
    assert [number for _, number in drain(outbox)] == list(range(10, ALARMS + 10))
    assert outbox.dropped == 10


def test_slow_connection_gets_the_latest_value() -> None:
    outbox = Outbox()
    outbox.open()
    for number in range(WINDOW):
        outbox.put(value("a", number))
        assert outbox.take() is not None
    for number in range(100, 200):
        outbox.put(value("a", number))
    assert len(outbox) == 2
    outbox.sent()
    latest = outbox.take()
    assert latest is not None
    assert latest.payload == b"199"


def test_full_window_holds_the_next_message_back_until_one_has_left() -> None:
    outbox = Outbox()
    outbox.open()
    for number in range(WINDOW + 1):
        outbox.put(value(f"t{number}", number))
    taken: list[Outgoing | None] = [outbox.take() for _ in range(WINDOW)]
    waiting = threading.Thread(target=lambda: taken.append(outbox.take()))
    waiting.start()
    assert len(taken) == WINDOW
    outbox.sent()
    waiting.join(10.0)
    assert len(taken) == WINDOW + 1
