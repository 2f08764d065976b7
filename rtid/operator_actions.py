"""Operator actions on one loop: what each does, what it says, when it is refused."""

from __future__ import annotations

from typing import cast

from rtid.actions import BECAUSE, Action, ActionName, ActionRefused
from rtid.judge.alarms import AlarmBook
from rtid.kept import Kept
from rtid.report import Transition
from rtid.settings import DEFAULT_ALARMS

_DETAIL = ("for_s", "because", "baseline", "reason")  # what the event of an action says beside its text


class Hold(Kept):
    """A person holds the loop, and for how long: a hold always ends by itself."""

    KEPT = ("until_s", "by")

    def __init__(self) -> None:
        self.until_s: float | None = None  # data time
        self.by = ""

    def standing(self, time_s: float) -> bool:
        return self.until_s is not None and time_s < self.until_s

    def ended(self, time_s: float) -> bool:
        """True once, when the time is over."""
        over = self.until_s is not None and time_s >= self.until_s
        if over:
            self.until_s = None
        return over

    def recall(self, event: Transition) -> None:
        """A hold or its end that was told after this state was kept."""
        if event.action == "hold":
            self.until_s, self.by = event.time_s + (event.detail or {}).get("for_s", 0.0), event.by or ""
        elif event.action == "resume":
            self.until_s = None

    def shift(self, delta_s: float) -> None:
        """The device's clock began anew."""
        self.until_s = None if self.until_s is None else self.until_s + delta_s


def action_event(action: Action, text: str, *, time_s: float, stamp: float) -> Transition:
    reason = f": {action.reason}" if action.reason else ""
    given = {name: getattr(action, name) for name in _DETAIL}
    detail = {name: value for name, value in given.items() if value} or None
    return Transition(
        None, None, "low", text + reason, time_s, stamp, action=action.name, by=action.by, detail=detail
    )


def recalled_action(event: Transition) -> Action:
    """The action that `action_event` told of."""
    return Action(cast(ActionName, event.action), event.by or "", **dict(event.detail or {}))


def check_action(action: Action) -> None:
    """Raises ActionRefused for an action that lacks something or names something that is not there."""
    if not action.by.strip():
        raise ActionRefused("say who you are: --by NAME")
    if action.name in ("hold", "shelve") and not (action.for_s is not None and 0.0 < action.for_s <= 366.0 * 86400.0):
        raise ActionRefused("give a duration above 0 and up to 366 d: --for 30m")
    if action.name in ("ack", "shelve", "unshelve") and action.alarm not in DEFAULT_ALARMS:
        raise ActionRefused(f"there is no alarm {action.alarm!r}; the alarms are: {', '.join(DEFAULT_ALARMS)}")
    if action.name == "rebaseline" and action.because not in BECAUSE:
        raise ActionRefused(f"say why: --because one of {', '.join(BECAUSE)}")
    if action.name == "note" and not action.text.strip():
        raise ActionRefused("the remark is empty")


def act_on_alarm(book: AlarmBook, action: Action, *, time_s: float, stamp: float) -> None:
    """ack, shelve, unshelve. Raises ActionRefused when there is nothing to act on."""
    alarm, signal, by, why = action.alarm or "", action.signal, action.by, action.reason
    if action.name == "shelve":
        until_s = time_s + (action.for_s or 0.0)
        book.shelve(alarm, signal=signal, until_s=until_s, by=by, time_s=time_s, stamp=stamp, why=why)
    elif action.name == "unshelve":
        if not book.unshelve(alarm, signal=signal, by=by, time_s=time_s, stamp=stamp, why=why):
            raise ActionRefused(f"{_subject(action)} is not shelved")
    elif not book.acknowledge(alarm, signal=signal, by=by, time_s=time_s, stamp=stamp, why=why):
        raise ActionRefused(f"{_subject(action)} does not wait for an acknowledgement")


def _subject(action: Action) -> str:
    return f"{action.alarm} of {action.signal}" if action.signal else str(action.alarm)
