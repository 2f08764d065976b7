from __future__ import annotations

import threading

from rtid.intake.queue import Item, ReadingQueue
from rtid.intake.reading import Counts, Reading


def reading(time: float, source: str = "drive") -> Reading:
    return Reading(source, time, {f"{source}.speed": 1.0})


def test_gives_everything_that_waits_in_order() -> None:
    queue = ReadingQueue()
    items: list[Item] = [reading(0.0), reading(1.0), lambda: None, reading(2.0)]
    for item in items:
        queue.put(item)
    assert queue.get(0.0) == items
    assert queue.get(0.0) == []


def test_full_queue_drops_the_oldest_and_counts_it_on_its_own_source() -> None:
    queue = ReadingQueue(limit=3)
    drive, hall = Counts(), Counts()
    queue.register("drive", drive)
    queue.register("hall", hall)
    queue.put(reading(0.0, "drive"))
    for time in (1.0, 2.0, 3.0):
        queue.put(reading(time, "hall"))
    assert [item.time for item in queue.get(0.0) if isinstance(item, Reading)] == [1.0, 2.0, 3.0]
    assert (drive.dropped, hall.dropped) == (1, 0)


def test_operator_actions_are_never_dropped() -> None:
    queue = ReadingQueue(limit=1)

    def action() -> None: ...

    queue.put(action)
    for time in range(5):
        queue.put(reading(float(time)))
    assert queue.get(0.0) == [action, reading(4.0)]


def test_a_waiting_reader_is_woken() -> None:
    queue = ReadingQueue()
    got: list[object] = []
    reader = threading.Thread(target=lambda: got.extend(queue.get(30.0)))
    reader.start()
    queue.put(reading(1.0))
    reader.join(10.0)
    assert got == [reading(1.0)]
