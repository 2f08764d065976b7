"""What a person tells a loop: the operator actions, and the refusal of one that makes no sense now."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

ActionName = Literal["hold", "resume", "ack", "shelve", "unshelve", "rebaseline", "restore", "note"]
BECAUSE = ("sensor", "repair", "grade", "retune", "other")


@dataclass(frozen=True, slots=True)
class Action:
    """One action. Which of the optional fields it needs depends on its name.

    `for_s`: how long a hold or a shelving lasts, seconds of data time; `alarm` with `signal` where the alarm is one
    of a signal; `because`: why a new baseline, one of BECAUSE; `baseline`: the one to restore; `text`: a remark.
    """

    name: ActionName
    by: str
    reason: str = ""
    for_s: float | None = None
    alarm: str | None = None
    signal: str | None = None
    because: str | None = None
    baseline: str | None = None
    text: str = ""


class ActionRefused(ValueError):
    """The action makes no sense now; the text is one line that says why and the mend."""
