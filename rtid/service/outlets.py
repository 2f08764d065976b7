"""Where the worker's reports go: the event list on disk first, then the broker, then who watches in this process."""

from __future__ import annotations

import logging
import time
from collections.abc import Callable, Mapping, Sequence
from typing import Any, Protocol

from rtid.errors import InputOutputError
from rtid.publish.events import EventLog
from rtid.publish.messages import event as event_payload
from rtid.publish.mqtt import MqttPublisher
from rtid.report import Report, Transition

NODE_LOOP = "_node"  # the place of the node's own alarms among the topics

log = logging.getLogger("rtid.service")


class Observer(Protocol):
    """Somebody in this process who watches: called by the worker, so it must be quick. What it raises is logged."""

    def report(self, report: Report) -> None: ...

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None: ...


class Outlets:
    """`deliver` takes every report of every loop. Nothing here blocks, and a full disk stops nothing."""

    def __init__(
        self, node: str, events: EventLog, *, publisher: MqttPublisher | None, observers: Sequence[Observer] = ()
    ) -> None:
        self._node = node
        self._events = events
        self._publisher = publisher
        self._observers = tuple(observers)
        self._failure = ""  # why the last event is not on disk
        self._alarmed = False

    def deliver(self, report: Report) -> None:
        for transition in report.transitions:
            self._event(transition, report.loop)
            self._watch_storage()
        self.publish(report)
        for observer in self._observers:
            _guarded(observer.report, report)

    def publish(self, report: Report) -> None:
        """Put a report on the broker: its numbers when it is due, its health when that changed."""
        if self._publisher is not None:
            self._publisher.report(report)

    def snapshot(self, payload: dict[str, Any], loop: str) -> None:
        if self._publisher is not None:
            self._publisher.snapshot(payload, loop)

    def _watch_storage(self) -> None:
        """The node's alarm `storage` stands while events cannot be written."""
        if bool(self._failure) == self._alarmed:
            return
        self._alarmed = not self._alarmed
        self._event(_storage(self._failure), NODE_LOOP)

    def _event(self, transition: Transition, loop: str) -> None:
        self._pass_on(self._record(transition, loop), transition, loop)

    def _record(self, transition: Transition, loop: str) -> dict[str, Any]:
        try:
            payload = self._events.append(transition, node=self._node, loop=loop)
        except InputOutputError as error:
            self._failure = str(error)
            return event_payload(transition, node=self._node, loop=loop, sequence=self._events.sequence)
        self._failure = ""
        return payload

    def _pass_on(self, payload: dict[str, Any], transition: Transition, loop: str) -> None:
        log.log(_level(transition), "%s: %s", loop, transition.text)
        if self._publisher is not None:
            self._publisher.event(payload, loop, transition)
        for observer in self._observers:
            _guarded(observer.event, payload, transition)


def _storage(failure: str) -> Transition:
    now = time.time()
    text = f"events are not stored: {failure}" if failure else "events are stored again, those that waited too"
    return Transition(
        alarm="storage",
        transition="active" if failure else "cleared",
        priority="medium",
        text=text,
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
