"""A live source that runs while a test watches it."""

from __future__ import annotations

from typing import Self

from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Reading
from rtid.service.intakes import Intake
from tests.support.wait import wait_until


class RunningSource:
    """`with RunningSource(intake, queue) as running:`; what came so far stands in `readings`."""

    def __init__(self, intake: Intake, queue: ReadingQueue) -> None:
        self.intake = intake
        self.queue = queue
        self.readings: list[Reading] = []

    def __enter__(self) -> Self:
        self.intake.start()
        return self

    def __exit__(self, *_: object) -> None:
        self.intake.stop()
        assert not self.intake.alive
        assert not self.intake.connected

    def wait_for(self, count: int) -> list[Reading]:
        """All readings so far, `count` at the least."""

        def enough() -> bool:
            self.readings += [item for item in self.queue.get(0.0) if isinstance(item, Reading)]
            return len(self.readings) >= count

        wait_until(enough, what=f"{count} readings")
        return self.readings
