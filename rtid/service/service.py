"""The long-running process: one thread per source that reads, one worker that owns every grid and loop."""

from __future__ import annotations

import logging
import threading
import time
from collections.abc import Callable, Sequence
from concurrent.futures import Future
from concurrent.futures import TimeoutError as WaitTimeout
from dataclasses import replace
from pathlib import Path
from typing import Any

from rtid import __version__
from rtid.errors import Unavailable, UsageError
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Reading
from rtid.publish import messages
from rtid.publish.events import EventLog
from rtid.publish.mqtt import MqttPublisher
from rtid.service import state_dir
from rtid.service.complaints import Complaints
from rtid.service.control import ControlServer
from rtid.service.control_socket import socket_path
from rtid.service.desk import Desk
from rtid.service.intakes import Intake, make_intake, origin
from rtid.service.notify import Notifier, in_words
from rtid.service.outlets import Observer, Outlets
from rtid.service.pipeline import Pipeline
from rtid.service.silence import SilenceWatch
from rtid.service.status import Board
from rtid.settings import Node
from rtid.valid_names import one_of

WAIT_S = 0.25  # longest wait for a reading: how late a stop or a silence is noticed
ANSWER_S = 20.0  # longest wait for the worker's answer: the fit of a baseline may take seconds on a small board
GOODBYE_S = 2.0  # longest wait for the sources to close

log = logging.getLogger("rtid.service")


class Service:
    """`run()` serves until `stop()`; `stop` and `snapshot` may be called from any thread, `stop` from a signal handler.

    Everything is made in `run`, so a Service that never ran has touched nothing.
    """

    def __init__(self, node: Node, *, observers: Sequence[Observer] = (), notifier: Notifier | None = None) -> None:
        self._node = node
        self._observers = tuple(observers)
        self._notifier = notifier or Notifier({})
        self._queue = ReadingQueue()
        self._stopping = threading.Event()
        self._pipeline: Pipeline | None = None

    def run(self) -> None:
        """Serve. Raises CannotCreate or Unavailable when the state directory cannot be had."""
        with state_dir.held(self._node.state_dir) as folder:
            publisher = self._make_publisher()
            events = EventLog(folder / "events.jsonl")
            outlets = Outlets(self._node.name, events, publisher=publisher, observers=self._observers)
            self._pipeline = Pipeline(self._node.loops, outlets.deliver)
            intakes = self._make_intakes()
            self._say_start(folder)
            if publisher is not None:
                publisher.start(messages.status(self._node.name, stamp=time.time(), loops=self._node.loops))
            for name in self._node.loops:  # what the broker kept of the last run is not true any more
                outlets.publish(self._pipeline.report(name, time.time()))
            now = time.monotonic()
            silence = SilenceWatch({name: told.stale_after_s for name, told in self._node.loops.items()}, now)
            board = Board(self._node, intakes, events=events, publisher=publisher, now=now)
            desk = Desk(self._node.name, outlets, silence=silence, board=board, ask=self._ask)
            try:
                with ControlServer(socket_path(folder), desk.answer):
                    self._serve(self._pipeline, intakes, silence=silence, board=board)
                self._finish(self._pipeline, outlets)
            finally:
                if publisher is not None:
                    publisher.stop()
                log.info("stopped")

    def stop(self) -> None:
        """Ask `run` to end in good order; returns at once."""
        self._stopping.set()

    def snapshot(self, loop: str, reason: str) -> dict[str, Any]:
        """The model of now, taken by the worker between two readings. Raises UsageError, Unavailable."""
        if loop not in self._node.loops:
            raise UsageError(f"no loop {loop!r}; expected {one_of(loop, self._node.loops)}")
        return self._ask(
            lambda pipeline: messages.snapshot(
                pipeline.loops[loop].snapshot(reason), node=self._node.name, stamp=time.time()
            )
        )

    def _ask(self, question: Callable[[Pipeline], dict[str, Any]]) -> dict[str, Any]:
        answer: Future[dict[str, Any]] = Future()

        def action() -> None:
            if not answer.set_running_or_notify_cancel():  # nobody waits for it any more: it is not done
                return
            try:
                assert self._pipeline is not None
                answer.set_result(question(self._pipeline))
            except Exception as error:
                answer.set_exception(error)

        self._queue.put(action)
        try:
            return answer.result(ANSWER_S)
        except WaitTimeout:
            undone = "nothing was done" if answer.cancel() else "it may still be done"
            raise Unavailable(f"the service does not answer, {undone}; is it running, is the computer busy?") from None

    def _serve(self, pipeline: Pipeline, intakes: Sequence[Intake], *, silence: SilenceWatch, board: Board) -> None:
        complaints = Complaints({intake.name: intake.counts for intake in intakes})
        for intake in intakes:
            intake.start()
        self._notifier.ready()
        try:
            while not self._stopping.is_set():
                self._turn(pipeline, silence)
                complaints.look(time.monotonic())
                board.look(pipeline, time.monotonic())
                self._notifier.status(in_words({name: loop.state for name, loop in pipeline.loops.items()}))
                self._notifier.alive(time.monotonic())
        finally:
            self._notifier.stopping()
            _stop(intakes)
        self._turn(pipeline, silence)

    def _turn(self, pipeline: Pipeline, silence: SilenceWatch) -> None:
        """Everything that waits in the queue, then the loops that went without."""
        for item in self._queue.get(WAIT_S):
            if not isinstance(item, Reading):
                item()
                continue
            for name in pipeline.feed(item, time.time()):
                silence.heard(name, time.monotonic())
        for name, seconds in silence.due(time.monotonic()):
            pipeline.silence(name, seconds=seconds, stamp=time.time())

    def _finish(self, pipeline: Pipeline, outlets: Outlets) -> None:
        for name in pipeline.loops:
            pipeline.flush(name, time.time())
            outlets.publish(replace(pipeline.report(name, time.time()), due=True))

    def _make_publisher(self) -> MqttPublisher | None:
        node = self._node
        if node.broker is None:
            return None
        return MqttPublisher(node.broker, node=node.name, client_id=f"rtid-{node.name}")

    def _make_intakes(self) -> list[Intake]:
        node = self._node
        return [
            make_intake(source, self._queue, broker=node.broker, client_id=f"rtid-{node.name}-{source.name}")
            for source in node.sources.values()
        ]

    def _say_start(self, folder: Path) -> None:
        node = self._node
        log.info("rtid %s, node %s", __version__, node.name)
        for source in node.sources.values():
            log.info("source %s: %s, %s", source.name, origin(source), source.decode)
        for loop in node.loops.values():
            log.info("loop %s: %s -> %s every %g s", loop.name, ", ".join(loop.inputs), loop.output, loop.period_s)
        log.info("state in %s", folder)
        if node.broker is not None:
            log.info("broker %s:%d, topics under %s/", node.broker.host, node.broker.port, node.broker.prefix)


def _stop(intakes: Sequence[Intake]) -> None:
    """All at once, and none for longer than two seconds: a broker that does not answer must not delay the goodbye."""
    endings = [threading.Thread(target=intake.stop, name=f"{intake.name}-end", daemon=True) for intake in intakes]
    for ending in endings:
        ending.start()
    deadline = time.monotonic() + GOODBYE_S
    for ending in endings:
        ending.join(max(0.0, deadline - time.monotonic()))
