"""Every baseline that a loop has ever had: the commissioning one stays for ever, any can be restored."""

from __future__ import annotations

from dataclasses import dataclass

from rtid.judge.baseline import Baseline
from rtid.kept import Kept
from rtid.report import Quantity


@dataclass(frozen=True, slots=True)
class AcceptedBaseline:
    """`because`, `by` and `reason` are those of the person who asked for it; empty for the commissioning baseline."""

    identity: str
    baseline: Baseline
    quantities: dict[str, Quantity]
    by: str = ""
    because: str = ""
    reason: str = ""


class BaselineBook(Kept):
    """Baselines in the order of acceptance; `present` is in force, None while one is learnt."""

    KEPT = ("all", "_present", "_last")

    def __init__(self, loop: str) -> None:
        self._loop = loop
        self.all: list[AcceptedBaseline] = []
        self._present: str | None = None
        self._last = 0  # the highest number ever given: no two baselines share a name

    @property
    def present(self) -> AcceptedBaseline | None:
        return next((b for b in self.all if b.identity == self._present), None)

    def next_identity(self) -> str:
        return f"{self._loop}-{self._last + 1}"

    def accept(self, accepted: AcceptedBaseline) -> None:
        """Put it in force, known already or not."""
        if accepted.identity not in [known.identity for known in self.all]:
            self.all.append(accepted)
        self._present = accepted.identity
        self.skip(int(accepted.identity.rpartition("-")[2]))

    def skip(self, last: int) -> None:
        """Numbers up to `last` were given in a life that is not remembered."""
        self._last = max(self._last, last)

    def restore(self, identity: str) -> AcceptedBaseline | None:
        """Put an old one in force; None when there is none of that name."""
        found = next((b for b in self.all if b.identity == identity), None)
        if found is not None:
            self._present = identity
        return found

    def set_aside(self) -> None:
        """A new one is being learnt."""
        self._present = None
