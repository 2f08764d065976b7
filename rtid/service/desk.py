"""Where requests are dealt with: checked in the thread of the client, done by the worker between two readings."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any, cast

from rtid.actions import Action, ActionName, ActionRefused
from rtid.errors import UsageError
from rtid.judge import wording
from rtid.publish import messages
from rtid.report import Report
from rtid.service.control_request import Request
from rtid.service.outlets import Outlets
from rtid.service.pipeline import Pipeline
from rtid.service.silence import SilenceWatch
from rtid.service.status import Board, baselines
from rtid.valid_names import one_of

Document = dict[str, Any]
Question = Callable[[Pipeline], Document]

_DEEDS = {"ack": "acknowledged", "shelve": "shelved", "unshelve": "unshelved"}


class Desk:
    """`ask` has a question answered by the worker; it raises Unavailable when the worker does not come to it."""

    def __init__(
        self, node: str, outlets: Outlets, *, silence: SilenceWatch, board: Board, ask: Callable[[Question], Document]
    ) -> None:
        self._node = node
        self._outlets = outlets
        self._silence = silence
        self._board = board
        self._ask = ask

    def answer(self, request: Request, peer: str) -> Document:
        """For the person `peer`, unless the request names another. Raises RtidError."""
        wanted = request.pop("node", self._node)
        if wanted != self._node:
            raise UsageError(f"the service of node {self._node!r} listens here, not that of {wanted!r}; give --socket")
        do = request.pop("do")
        return self._ask(lambda pipeline: self._do(do, request, peer, pipeline))

    def _do(self, do: str, request: Request, peer: str, pipeline: Pipeline) -> Document:
        loop = request.pop("loop", None)
        if loop is not None and loop not in pipeline.loops:
            raise UsageError(f"no loop {loop!r}; expected {one_of(loop, pipeline.loops)}")
        if do == "status":
            return self._status(pipeline, loop)
        if do == "baselines":
            return {"loop": loop, "baselines": baselines(pipeline.loops[loop])}
        request.setdefault("by", peer)
        if do == "snapshot":
            return self._snapshot(pipeline, loop, request)
        return self._act(pipeline, loop, Action(cast(ActionName, do), **request))

    def _status(self, pipeline: Pipeline, loop: str | None) -> Document:
        loops = list(pipeline.loops) if loop is None else [loop]
        return self._board.document(pipeline, loops, now=time.monotonic(), stamp=time.time())

    def _snapshot(self, pipeline: Pipeline, loop: str, request: Request) -> Document:
        reason = request.get("reason") or f"asked for by {request['by']}"
        body = pipeline.loops[loop].snapshot(reason)
        payload = messages.snapshot(body, node=self._node, stamp=time.time())
        self._outlets.snapshot(payload, loop)
        return payload

    def _act(self, pipeline: Pipeline, loop: str, action: Action) -> Document:
        signals = pipeline.loops[loop].settings.signals
        if action.signal is not None and action.signal not in signals:
            raise UsageError(f"loop {loop} has no signal {action.signal!r}; expected {one_of(action.signal, signals)}")
        silent_s = self._silence.seconds(loop, time.monotonic())
        try:
            report = pipeline.act(loop, action, silent_s=silent_s, stamp=time.time())
        except ActionRefused as refusal:
            raise UsageError(f"{loop}: {refusal}") from None
        return {"loop": loop, "text": _said(pipeline, action, report), "state": report.state, "health": report.health}


def _said(pipeline: Pipeline, action: Action, report: Report) -> str:
    """What was done, for the person who did it."""
    if action.name not in _DEEDS:
        return next(t.text for t in reversed(report.transitions) if t.action == action.name)
    subject = f"{action.alarm} of {action.signal}" if action.signal else str(action.alarm)
    if action.name == "shelve":
        shelved = pipeline.loops[report.loop].shelved
        until = next(end for alarm, signal, end in shelved if (alarm, signal) == (action.alarm, action.signal))
        return wording.shelved_text(subject, until)
    return f"{subject} is {_DEEDS[action.name]}"
