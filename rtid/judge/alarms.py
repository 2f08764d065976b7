"""The life of alarms: on-delay, off-delay, latching, acknowledgement (ISA-18.2, IEC 62682), all in data time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rtid.judge import wording
from rtid.kept import Kept
from rtid.report import ActiveAlarm, Transition, TransitionName
from rtid.settings import DEFAULT_ALARMS, AlarmSetting

_SHARPER = 0.4


@dataclass(frozen=True, slots=True)
class Finding:
    """What a check found about one alarm condition at one time."""

    present: bool
    text: str = ""
    quantity: str | None = None
    change_pct: float | None = None
    low_pct: float | None = None
    high_pct: float | None = None


@dataclass(slots=True)
class AlarmEntry:
    """Where one alarm stands in its life."""

    pending_since: float | None = None  # data time at which the condition began or ended and still waits for its delay
    active: ActiveAlarm | None = None
    raised: bool = False  # it has been heard of
    acknowledged: bool = False
    clear: bool = True  # the condition is absent though the alarm may be latched
    last: Finding = Finding(False)
    shelved_until: float | None = None  # data time


class AlarmBook(Kept):
    """All alarms of one loop. `settings`: per alarm name; names not in it have the contract's defaults."""

    KEPT = ("_entries",)

    def __init__(self, settings: Mapping[str, AlarmSetting]) -> None:
        self._settings = DEFAULT_ALARMS | dict(settings)
        self._entries: dict[tuple[str, str | None], AlarmEntry] = {}
        self._transitions: list[Transition] = []

    def note(self, alarm: str, finding: Finding, *, time_s: float, stamp: float, signal: str | None = None) -> None:
        """Tell the book whether a condition is present now; it makes the transitions that are due."""
        entry = self._entries.get((alarm, signal))
        if entry is None:
            if not finding.present:
                return
            entry = self._entries[(alarm, signal)] = AlarmEntry()
        key = (alarm, signal)
        if entry.active is None:
            self._maybe_raise(key, entry, finding, time_s, stamp)
        elif finding.present:
            entry.pending_since = None
            entry.clear = False
            if finding.quantity != entry.last.quantity or _sharper(finding, entry.last):
                self._emit(key, entry, "updated", finding, time_s, stamp)
        else:
            entry.clear = True
            self._maybe_clear(key, entry, finding.text, time_s, stamp)

    def acknowledge(
        self, alarm: str, *, time_s: float, stamp: float, by: str, signal: str | None = None, why: str = ""
    ) -> bool:
        """False when there is nothing to acknowledge."""
        entry = self._entries.get((alarm, signal))
        if entry is None or entry.acknowledged or not entry.raised:
            return False
        entry.acknowledged = True
        retain = entry.active is not None
        finding = _told(entry.last, f"acknowledged by {by}", why)
        self._transitions.append(
            self._transition((alarm, signal), "acknowledged", finding, time_s, stamp, by=by, retain=retain)
        )
        if entry.active is not None:
            entry.active = replace(entry.active, acknowledged=True)
        elif entry.shelved_until is None:
            del self._entries[(alarm, signal)]
        return True

    @property
    def has_transitions(self) -> bool:
        return bool(self._transitions)

    def withdraw(self, alarms: tuple[str, ...], *, time_s: float, stamp: float) -> None:
        """What these stood for is void, latched or not."""
        for alarm in alarms:
            entry = self._entries.get((alarm, None))
            if entry is not None and entry.active is not None:
                self._finish((alarm, None), entry, time_s, stamp)

    def shelve(
        self, alarm: str, *, signal: str | None, until_s: float, by: str, time_s: float, stamp: float, why: str = ""
    ) -> None:
        """Nothing is heard of the alarm until `until_s` of data time."""
        entry = self._entries.setdefault((alarm, signal), AlarmEntry())
        entry.shelved_until = until_s
        text = f"{wording.shelved_text(alarm, stamp + until_s - time_s)}; by {by}"
        finding = _told(entry.last, text, why)
        shelved = self._transition((alarm, signal), "shelved", finding, time_s, stamp, by=by)
        self._transitions.append(replace(shelved, detail={"for_s": until_s - time_s}))

    def unshelve(
        self, alarm: str, *, signal: str | None, by: str | None, time_s: float, stamp: float, why: str = ""
    ) -> bool:
        """False when it was not shelved. An alarm that stands is heard again."""
        key = (alarm, signal)
        entry = self._entries.get(key)
        if entry is None or entry.shelved_until is None:
            return False
        entry.shelved_until = None
        standing = entry.active is not None
        finding = _told(entry.last, f"unshelved by {by}" if by else "the shelving has ended by itself", why)
        self._transitions.append(
            self._transition(key, "unshelved", finding, time_s, stamp, by=by, retain=standing)
        )
        if standing:
            self._transitions.append(self._transition(key, "active", entry.last, time_s, stamp))
        else:
            del self._entries[key]
        return True

    def end_shelvings(self, *, time_s: float, stamp: float) -> None:
        """Unshelve what has been shelved long enough."""
        for (alarm, signal), entry in list(self._entries.items()):
            if entry.shelved_until is not None and time_s >= entry.shelved_until:
                self.unshelve(alarm, signal=signal, by=None, time_s=time_s, stamp=stamp)

    def shelved(self) -> list[tuple[str, str | None, float]]:
        """Name and signal of the shelved alarms, and the data times at which that ends."""
        return [(*key, e.shelved_until) for key, e in self._entries.items() if e.shelved_until is not None]

    def shift(self, delta_s: float) -> None:
        """The device's clock began anew: what waits, waits as long as before."""
        for entry in self._entries.values():
            entry.pending_since = None if entry.pending_since is None else entry.pending_since + delta_s
            entry.shelved_until = None if entry.shelved_until is None else entry.shelved_until + delta_s

    @property
    def open(self) -> frozenset[tuple[str, str | None]]:
        """Name and signal of the alarms that are not both back to normal and acknowledged."""
        return frozenset(self._entries)

    def recall(self, event: Transition) -> None:
        """Take the step of an event that was told after this state was kept, without telling it again."""
        key = (event.alarm or "", event.signal)
        entry = self._entries.setdefault(key, AlarmEntry())
        if event.transition in ("active", "updated"):
            self._recall_standing(entry, event)
        elif event.transition == "cleared":
            entry.active, entry.clear, entry.raised = None, True, True
            entry.last = replace(entry.last, present=False, text=event.text)
        elif event.transition == "acknowledged":
            entry.acknowledged = True
            entry.active = replace(entry.active, acknowledged=True) if entry.active else None
        elif event.transition == "shelved":
            entry.shelved_until = event.time_s + (event.detail or {}).get("for_s", 0.0)
        else:  # where it stands, `active` comes next
            entry.shelved_until, entry.active = None, None
        waits = entry.raised and not entry.acknowledged
        if entry.active is None and entry.shelved_until is None and (not waits or event.transition == "unshelved"):
            del self._entries[key]

    def take_transitions(self) -> tuple[Transition, ...]:
        taken, self._transitions = tuple(self._transitions), []
        return taken

    def active(self) -> tuple[ActiveAlarm, ...]:
        standing = (e for e in self._entries.values() if e.shelved_until is None)
        return tuple(entry.active for entry in standing if entry.active is not None)

    @staticmethod
    def _recall_standing(entry: AlarmEntry, event: Transition) -> None:
        finding = Finding(True, event.text, event.quantity, event.change_pct, event.low_pct, event.high_pct)
        fresh = ActiveAlarm(event.alarm or "", event.priority, event.stamp, event.text, event.signal, event.quantity)
        if entry.active is None:
            entry.active, entry.acknowledged = fresh, False
        else:
            entry.active = replace(entry.active, text=event.text, quantity=event.quantity)
        entry.last, entry.clear, entry.raised, entry.pending_since = finding, False, True, None

    def _maybe_raise(self, key: tuple[str, str | None], entry: AlarmEntry, finding: Finding, *when: float) -> None:
        if not finding.present:
            entry.pending_since = None
            return
        time_s, stamp = when
        entry.pending_since = time_s if entry.pending_since is None else entry.pending_since
        setting = self._settings[key[0]]
        if time_s - entry.pending_since >= setting.on_delay_s:
            entry.pending_since, entry.clear, entry.acknowledged, entry.raised = None, False, False, True
            entry.active = ActiveAlarm(key[0], setting.priority, stamp, finding.text, key[1], finding.quantity)
            self._emit(key, entry, "active", finding, time_s, stamp)

    def _maybe_clear(self, key: tuple[str, str | None], entry: AlarmEntry, why: str, *when: float) -> None:
        time_s, stamp = when
        setting = self._settings[key[0]]
        entry.pending_since = time_s if entry.pending_since is None else entry.pending_since
        held = setting.latching and not entry.acknowledged
        if time_s - entry.pending_since >= setting.off_delay_s and not held:
            self._finish(key, entry, time_s, stamp, why=why)

    def _finish(
        self, key: tuple[str, str | None], entry: AlarmEntry, time_s: float, stamp: float, *, why: str = ""
    ) -> None:
        finding = replace(entry.last, present=False, text=why or f"back to normal: {key[0].replace('_', ' ')}")
        entry.active, entry.pending_since, entry.last = None, None, finding
        if entry.shelved_until is not None:
            return
        self._transitions.append(
            self._transition(key, "cleared", finding, time_s, stamp, retain=not entry.acknowledged)
        )
        if entry.acknowledged:
            del self._entries[key]

    def _emit(
        self, key: tuple[str, str | None], entry: AlarmEntry, name: TransitionName, finding: Finding, *when: float
    ) -> None:
        assert entry.active is not None
        entry.active = replace(entry.active, text=finding.text, quantity=finding.quantity)
        entry.last = finding
        if entry.shelved_until is None:
            self._transitions.append(self._transition(key, name, finding, *when))

    def _transition(
        self, key: tuple[str, str | None], name: TransitionName, finding: Finding, *when: float,
        by: str | None = None, retain: bool = True,
    ) -> Transition:  # fmt: skip
        return Transition(
            alarm=key[0], transition=name, priority=self._settings[key[0]].priority, text=finding.text,
            time_s=when[0], stamp=when[1], signal=key[1], quantity=finding.quantity, change_pct=finding.change_pct,
            low_pct=finding.low_pct, high_pct=finding.high_pct, by=by, retain=retain,
        )  # fmt: skip


def _told(finding: Finding, words: str, why: str) -> Finding:
    """`finding` with a person's deed before its text."""
    said = f"{words}: {why}" if why else words
    return replace(finding, text=". ".join(part for part in (said, finding.text) if part))


def _sharper(now: Finding, told: Finding) -> bool:
    """The limits are so much narrower than what was told that a person should hear it again."""
    if now.low_pct is None or now.high_pct is None or told.low_pct is None or told.high_pct is None:
        return False
    return now.high_pct - now.low_pct < _SHARPER * (told.high_pct - told.low_pct)
