"""Where the worker's reports go: to the disk first, then the broker, then who watches in this process."""

from __future__ import annotations

import logging
import time
from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import Any, Protocol

from rtid.publish.events import Event
from rtid.publish.mqtt import MqttPublisher
from rtid.report import Report, Transition
from rtid.service.memory import Memory

NODE_LOOP = "_node"  # the place of the node's own alarms among the topics
STORAGE = "storage"

log = logging.getLogger("rtid.service")


class Observer(Protocol):
    """Somebody in this process who watches: called by the worker, so it must be quick. What it raises is logged."""

    def report(self, report: Report) -> None: ...

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None: ...


class Outlets:
    """`deliver` takes every report of every loop. Nothing here blocks, and a full disk stops nothing."""

    def __init__(self, memory: Memory, *, observers: Sequence[Observer] = ()) -> None:
        self._memory = memory
        self._observers = tuple(observers)
        self._publisher: MqttPublisher | None = None
        before = memory.events.latest(STORAGE)
        self._alarmed = before is not None and before["transition"] == "active"

    def connect(self, publisher: MqttPublisher | None) -> None:
        """Publish there from now on; the one before has said goodbye."""
        self._publisher = publisher
        if publisher is not None and not self._alarmed:  # a killed service may have left it behind
            publisher.standing(NODE_LOOP, {(STORAGE, None): None})

    def deliver(self, reports: Sequence[Report]) -> None:
        """Of one loop, in the order in which they came about; the loop is as they say together."""
        self.tell(reports[0].loop, [transition for report in reports for transition in report.transitions])
        for report in reports:
            self.publish(report)
            for observer in self._observers:
                _guarded(observer.report, report)

    def tell(self, loop: str, transitions: Iterable[Transition]) -> None:
        """What happened to a loop, or to the node: kept on the disk, then told."""
        happened = list(transitions)
        for event, transition in zip(self._memory.keep(loop, happened), happened, strict=True):
            self._pass_on(event, transition, loop)
        if happened:
            self.watch_storage()

    def publish(self, report: Report) -> None:
        """Put a report on the broker: its numbers when it is due, its health when that changed."""
        if self._publisher is not None:
            self._publisher.report(report)

    def announce(self, report: Report) -> None:
        """What the broker is to keep of a loop and of its alarms, whatever it kept before."""
        self.publish(report)
        if self._publisher is not None:
            self._publisher.standing(report.loop, self._memory.told(report.loop))

    def forget(self, loop: str) -> None:
        """Nothing is to be kept of a loop that is watched no longer."""
        if self._publisher is not None:
            self._publisher.standing(loop, dict.fromkeys(self._memory.told(loop)))
            self._publisher.forget(loop)

    def snapshot(self, payload: dict[str, Any], loop: str) -> None:
        if self._publisher is not None:
            self._publisher.snapshot(payload, loop)

    def watch_storage(self) -> None:
        """The node's alarm `storage` stands while something cannot be written."""
        failure = self._memory.failure
        if bool(failure) != self._alarmed:
            self._alarmed = not self._alarmed
            self.tell(NODE_LOOP, [_storage(failure)])

    def _pass_on(self, event: Event, transition: Transition, loop: str) -> None:
        log.log(_level(transition), "%s: %s", loop, transition.text)
        if self._publisher is not None:
            self._publisher.event(event, loop, transition)
        for observer in self._observers:
            _guarded(observer.event, event, transition)


def _storage(failure: str) -> Transition:
    now = time.time()
    return Transition(
        alarm=STORAGE,
        transition="active" if failure else "cleared",
        priority="medium",
        text=f"state and events are not stored: {failure}" if failure else "state and events are stored again",
        time_s=now,
        stamp=now,
        retain=bool(failure),
    )


def _level(transition: Transition) -> int:
    return logging.WARNING if transition.transition in {"active", "updated"} else logging.INFO


def _guarded(call: Callable[..., None], *arguments: object) -> None:
    try:
        call(*arguments)
    except Exception as error:
        log.error("an observer failed and was passed over: %s: %s", type(error).__name__, error)
