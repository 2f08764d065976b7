"""Operator actions on one loop: what each does, what it says, when it is refused."""

from __future__ import annotations

from rtid.actions import BECAUSE, Action, ActionRefused
from rtid.judge.alarms import AlarmBook
from rtid.kept import Kept
from rtid.report import Transition
from rtid.settings import DEFAULT_ALARMS


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

    def shift(self, delta_s: float) -> None:
        """The device's clock began anew."""
        self.until_s = None if self.until_s is None else self.until_s + delta_s


def action_event(action: Action, text: str, *, time_s: float, stamp: float) -> Transition:
    reason = f": {action.reason}" if action.reason else ""
    return Transition(None, None, "low", text + reason, time_s, stamp, action=action.name, by=action.by)


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
    alarm = action.alarm or ""
    if action.name == "shelve":
        until_s = time_s + (action.for_s or 0.0)
        book.shelve(alarm, signal=action.signal, until_s=until_s, by=action.by, time_s=time_s, stamp=stamp)
    elif action.name == "unshelve":
        if not book.unshelve(alarm, signal=action.signal, by=action.by, time_s=time_s, stamp=stamp):
            raise ActionRefused(f"{alarm} is not shelved")
    elif not book.acknowledge(alarm, signal=action.signal, by=action.by, time_s=time_s, stamp=stamp):
        raise ActionRefused(f"{alarm} does not wait for an acknowledgement")
