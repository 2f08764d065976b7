"""Which loops have gone without readings for too long, by the monotonic clock."""

from __future__ import annotations

from collections.abc import Mapping


class SilenceWatch:
    """`due` names a loop when its readings have been away for its `stale_after_s`, then once per `stale_after_s`."""

    def __init__(self, stale_after_s: Mapping[str, float], now: float) -> None:
        self._after = dict(stale_after_s)
        self._heard = dict.fromkeys(self._after, now)
        self._said = dict.fromkeys(self._after, now)

    def follow(self, stale_after_s: Mapping[str, float], now: float) -> None:
        """Watch these from now on; those that are watched already keep their times."""
        self._after = dict(stale_after_s)
        self._heard = {name: self._heard.get(name, now) for name in self._after}
        self._said = {name: self._said.get(name, now) for name in self._after}

    def heard(self, loop: str, now: float) -> None:
        self._heard[loop] = self._said[loop] = now

    def seconds(self, loop: str, now: float) -> float:
        """How long ago its last reading came."""
        return now - self._heard[loop]

    def due(self, now: float) -> list[tuple[str, float]]:
        """(loop, seconds without a reading) of those that are to be told now."""
        late = [name for name, after in self._after.items() if now - self._said[name] >= after]
        for name in late:
            self._said[name] = now
        return [(name, now - self._heard[name]) for name in late]
