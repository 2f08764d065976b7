"""Which serial ports there are, by the names that do not move, and what opening one may do."""

from __future__ import annotations

from pathlib import Path

from rtid.settings import Source

_DEVICES = Path("/dev/serial")


def port_names(devices: Path = _DEVICES) -> list[str]:
    """Stable names of the ports present: by identity, or by place of the plug where no identity is known.

    Two adapters without serial number share one name by identity; then use the names by place.
    """
    for folder in ("by-id", "by-path"):
        names = sorted(str(path) for path in (devices / folder).glob("*"))
        if names:
            return names
    return []


def reset_warning(source: Source) -> str:
    """One sentence to be shown before the port of `source` is opened for the first time."""
    port = source.serial.port if source.serial else source.name
    return (
        f"{source.name}: opening {port} restarts some boards; an isolated line on which rtid only receives "
        "is the wiring to prefer"
    )
