"""The long-running process: one thread per source that reads, one worker that owns every grid and loop."""

from __future__ import annotations

import logging
import os
import threading
import time
from collections.abc import Callable, Sequence
from concurrent.futures import Future
from concurrent.futures import TimeoutError as WaitTimeout
from contextlib import AbstractContextManager, nullcontext
from pathlib import Path
from typing import Any

from rtid import __version__
from rtid.errors import ConfigError, RtidError, Unavailable, UsageError
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Reading
from rtid.publish import messages
from rtid.service import state_dir
from rtid.service.control import ControlServer
from rtid.service.control_socket import socket_path
from rtid.service.desk import Desk
from rtid.service.notify import Notifier, in_words
from rtid.service.outlets import Observer
from rtid.service.parts import Parts
from rtid.service.pipeline import Pipeline
from rtid.service.silence import SilenceWatch
from rtid.settings import Node
from rtid.valid_names import one_of

WAIT_S = 0.25  # longest wait for a reading: how late a stop or a silence is noticed
ANSWER_S = 20.0  # longest wait for the worker's answer: the fit of a baseline may take seconds on a small board

log = logging.getLogger("rtid.service")


class Service:
    """`run()` serves until `stop()`; `stop`, `reload`, `snapshot` from any thread, the first two from signal handlers.

    `reread` reads the configuration anew; it raises RtidError. Everything is made in `run`, so a Service that never ran
    has touched nothing.
    """

    def __init__(
        self, node: Node, *, observers: Sequence[Observer] = (), notifier: Notifier | None = None,
        reread: Callable[[], Node] | None = None,
    ) -> None:  # fmt: skip
        self._node = node
        self._observers = tuple(observers)
        self._notifier = notifier or Notifier({})
        self._reread = reread or (lambda: node)
        self._queue = ReadingQueue()
        self._stopping = threading.Event()
        self._reloading = threading.Event()
        self._pipeline: Pipeline | None = None

    def run(self) -> None:
        """Serve. Raises CannotCreate or Unavailable when the state directory cannot be had."""
        with state_dir.held(self._node.state_dir) as folder:
            log.info("rtid %s, node %s, state in %s", __version__, self._node.name, folder)
            parts = Parts(folder, self._node, self._queue, observers=self._observers)
            self._pipeline = parts.pipeline
            try:
                with self._control(folder, parts):
                    parts.follow(self._node)
                    self._serve(parts)
                parts.finish()
            finally:
                parts.close()
                log.info("stopped")

    def stop(self) -> None:
        """Ask `run` to end in good order; returns at once."""
        self._stopping.set()

    def reload(self) -> None:
        """Ask `run` to follow the configuration as it is now; returns at once. A bad one is refused, in the log."""
        self._reloading.set()

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

    def _control(self, folder: Path, parts: Parts) -> AbstractContextManager[object]:
        """The control socket, unless it would lie in a state directory that cannot be written."""
        path = socket_path(folder)
        if path.parent == folder and not os.access(folder, os.W_OK | os.X_OK):
            log.error("%s: cannot be written to: no control socket is made, `rtid status` will not answer", folder)
            return nullcontext()
        desk = Desk(self._node.name, parts.outlets, silence=parts.silence, board=parts.board, ask=self._ask)
        return ControlServer(path, desk.answer)

    def _serve(self, parts: Parts) -> None:
        self._notifier.ready()
        try:
            while not self._stopping.is_set():
                if self._reloading.is_set():
                    self._reload(parts)
                self._turn(parts.pipeline, parts.silence)
                parts.tend(time.monotonic())
                self._notifier.status(in_words({name: loop.state for name, loop in parts.pipeline.loops.items()}))
                self._notifier.alive(time.monotonic())
        finally:
            self._notifier.stopping()
            parts.intakes.stop()
        self._turn(parts.pipeline, parts.silence)

    def _reload(self, parts: Parts) -> None:
        self._reloading.clear()
        self._notifier.reloading()
        try:
            node = self._reread()
            _check_same_place(self._node, node)
            parts.follow(node)
        except RtidError as error:
            log.error("the configuration is not taken over, the service goes on with the one before: %s", error)
        else:
            self._node = node
            log.info("the configuration is taken over")
        self._notifier.ready()

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


def _check_same_place(before: Node, after: Node) -> None:
    """Raises ConfigError."""
    for what, old, new in (("node", before.name, after.name), ("state_dir", before.state_dir, after.state_dir)):
        if new != old:
            raise ConfigError(f"{what} is {new!r} now and was {old!r}: that needs a restart of the service")
