"""The real service in a thread of its own, and its news for the thread that tells the story."""

from __future__ import annotations

import queue
import threading
from collections.abc import Mapping
from types import TracebackType
from typing import Any, Self

from rtid.errors import Unavailable
from rtid.report import Report, Transition
from rtid.service.service import Service
from rtid.settings import Node

News = Report | Transition


class RunningService:
    """`with RunningService(node) as service:` serves until the block is left."""

    def __init__(self, node: Node) -> None:
        self._news: queue.SimpleQueue[News] = queue.SimpleQueue()
        self._service = Service(node, observers=[self])
        self._failure: Exception | None = None
        self._thread = threading.Thread(target=self._run, name="service")

    def __enter__(self) -> Self:
        self._thread.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self._service.stop()
        self._thread.join()

    def news(self, seconds: float) -> list[News]:
        """What was reported since the last call, waiting at most `seconds` for it. Raises what ended the service."""
        if not self._thread.is_alive():
            raise self._failure or Unavailable("the service ended before the demo did")
        try:
            found = [self._news.get(timeout=seconds)]
        except queue.Empty:
            return []
        while not self._news.empty():
            found.append(self._news.get())
        return found

    def snapshot(self, loop: str, reason: str) -> dict[str, Any]:
        return self._service.snapshot(loop, reason)

    def report(self, report: Report) -> None:
        if report.due:
            self._news.put(report)

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        self._news.put(transition)

    def _run(self) -> None:
        try:
            self._service.run()
        except Exception as error:
            self._failure = error
