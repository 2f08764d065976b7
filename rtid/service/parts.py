"""What a running service is made of, and how all of it follows a configuration: the first one and every later one."""

from __future__ import annotations

import logging
import time
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from rtid.intake.queue import ReadingQueue
from rtid.publish import messages
from rtid.publish.mqtt import MqttPublisher
from rtid.service.complaints import Complaints
from rtid.service.intakes import Intakes, origin
from rtid.service.memory import Memory, Remembered
from rtid.service.outlets import Observer, Outlets
from rtid.service.pipeline import Pipeline
from rtid.service.silence import SilenceWatch
from rtid.service.status import Board
from rtid.settings import Node

log = logging.getLogger("rtid.service")


class Parts:
    """`follow` first; then the worker feeds `pipeline` and calls `tend` at every turn; `finish`, `close` at the end."""

    def __init__(self, folder: Path, node: Node, queue: ReadingQueue, *, observers: Sequence[Observer]) -> None:
        now = time.monotonic()
        self._node = replace(node, broker=None, sources={}, loops={})  # what is followed now
        self._memory = Memory(folder, node.name)
        self._publisher: MqttPublisher | None = None
        self._outlets = Outlets(self._memory, observers=observers)
        self._complaints = Complaints({})
        self.pipeline = Pipeline({}, self._outlets.deliver)
        self.intakes = Intakes(queue)
        self.silence = SilenceWatch({}, now)
        self.board = Board(node, self._memory.events, now)

    @property
    def outlets(self) -> Outlets:
        return self._outlets

    def follow(self, node: Node) -> None:
        """Serve this configuration from now on; what is as before goes on untouched.

        Raises MissingInput or InputOutputError, before anything has changed, when a file that it names cannot be read.
        """
        publisher, planned = self._publisher_for(node), self.intakes.plan(node)
        connects = publisher is not self._publisher
        changed = self._follow_loops(node)
        if connects:
            self._connect(publisher, node)
        elif publisher is not None and node.loops.keys() != self._node.loops.keys():
            publisher.greet(_status(node))
        for one in changed:
            self._outlets.tell(one.loop.settings.name, one.news)
        stamp = time.time()
        for name in node.loops if connects else [one.loop.settings.name for one in changed]:
            self._outlets.announce(replace(self.pipeline.report(name, stamp), due=True))
        self._say(node)
        self.intakes.follow(planned)
        self._watch(node)
        self._node = node

    def tend(self, now: float) -> None:
        """What is due beside the readings. `now` is the monotonic clock."""
        self._memory.tend(now)
        self._outlets.watch_storage()
        self._complaints.look(now)
        self.board.look(self.pipeline, now)

    def finish(self) -> None:
        """Close what is open, and keep all of it."""
        for name in self.pipeline.loops:
            self.pipeline.flush(name, time.time())
            self._outlets.publish(replace(self.pipeline.report(name, time.time()), due=True))
        self._memory.save_all()
        self._outlets.watch_storage()
        if self._memory.failure:
            log.error("the service ends and its state of now is not stored: %s", self._memory.failure)

    def close(self) -> None:
        """Say goodbye to the broker."""
        if self._publisher is not None:
            self._publisher.stop()

    def _publisher_for(self, node: Node) -> MqttPublisher | None:
        if node.broker == self._node.broker:
            return self._publisher
        if node.broker is None:
            return None
        return MqttPublisher(node.broker, node=node.name, client_id=f"rtid-{node.name}")

    def _connect(self, publisher: MqttPublisher | None, node: Node) -> None:
        self.close()
        self._publisher = publisher
        if publisher is not None:
            publisher.start(_status(node))
        self._outlets.connect(publisher)

    def _follow_loops(self, node: Node) -> list[Remembered]:
        """Those that are new or changed, from the disk or from what they were."""
        before, stamp = self._node.loops, time.time()
        for name in before.keys() - node.loops.keys():
            self.pipeline.flush(name, stamp)
            self._outlets.forget(name)
            self._memory.drop(name)
            self.pipeline.drop(name)
        others = [told for name, told in node.loops.items() if before.get(name) != told]
        changed = [self._memory.change(told, stamp) for told in others if told.name in before]
        changed += self._memory.restore([told for told in others if told.name not in before], stamp)
        for one in changed:
            self.pipeline.put(one.loop, one.grid)
        return changed

    def _watch(self, node: Node) -> None:
        self.silence.follow({name: told.stale_after_s for name, told in node.loops.items()}, time.monotonic())
        self._complaints.follow({intake.name: intake.counts for intake in self.intakes.running})
        self.board.follow(node, self.intakes.running, self._publisher)

    def _say(self, node: Node) -> None:
        """What is other than before."""
        before = self._node
        for name, source in node.sources.items():
            if before.sources.get(name) != source:
                log.info("source %s: %s, %s", name, origin(source), source.decode)
        for name, loop in node.loops.items():
            if before.loops.get(name) != loop:
                log.info("loop %s: %s -> %s every %g s", name, ", ".join(loop.inputs), loop.output, loop.period_s)
        gone = [*(before.sources.keys() - node.sources.keys()), *(before.loops.keys() - node.loops.keys())]
        if gone:
            log.info("no longer in the configuration: %s", ", ".join(sorted(gone)))
        if node.broker is not None and node.broker != before.broker:
            log.info("broker %s, topics under %s/", node.broker.address, node.broker.prefix)


def _status(node: Node) -> messages.Payload:
    return messages.status(node.name, stamp=time.time(), loops=node.loops)
