"""What a part of the mathematics keeps over a restart: the attributes that it names, and nothing else."""

from __future__ import annotations

from typing import Any, ClassVar


class Kept:
    """Base of everything that has a state. `KEPT` names the attributes; a Kept attribute keeps its own.

    `to_state` gives plain values, arrays and frozen records; whoever stores them must give back equal ones.
    What follows from the settings is not kept: it is made anew, and only then comes `load_state`.
    """

    KEPT: ClassVar[tuple[str, ...]] = ()

    def to_state(self) -> dict[str, Any]:
        return {name: _kept(getattr(self, name)) for name in self.KEPT}

    def load_state(self, state: dict[str, Any]) -> None:
        """Raises KeyError where the state lacks an attribute."""
        for name in self.KEPT:
            present = getattr(self, name, None)
            if isinstance(present, Kept):
                present.load_state(state[name])
            else:
                setattr(self, name, state[name])


def _kept(value: Any) -> Any:
    if isinstance(value, Kept):
        return value.to_state()
    return value.copy() if isinstance(value, dict | list) else value
