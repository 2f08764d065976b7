"""Short ways to say what a source is, for tests of the intake."""

from __future__ import annotations

from typing import Any

from rtid.settings import Place, Signal, Source


def signal(full_name: str, *, quality: Any = None, scale: Any = None, **place: Any) -> Signal:
    """`signal("drive.speed", column=1)`: the remaining words say where it stands."""
    return Signal(full_name, Place(**place), quality=quality, scale=scale)


def source(decode: Any, *signals: Signal, **more: Any) -> Source:
    """A source that bears the name before the dot of its signals."""
    return Source(signals[0].name.partition(".")[0], decode, signals, **more)
