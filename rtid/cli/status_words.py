"""Pieces of what `status` and `watch` print: ages, rates, changes with limits, and the order, worst first."""

from __future__ import annotations

from typing import Any, get_args

from rtid.report import Health

WIDTH = 80

_MINUTE, _HOUR, _DAY = 60.0, 3600.0, 86400.0


def worst_first(loops: dict[str, Any]) -> list[tuple[str, dict[str, Any]]]:
    """By health, then by drift, then by name."""
    rising = get_args(Health)
    return sorted(
        loops.items(),
        key=lambda item: (-rising.index(item[1]["health"]), -(item[1]["drift_ratio"] or 0.0), item[0]),
    )


def span(seconds: float) -> str:
    """A length of time in the two largest units that matter."""
    if seconds < 2 * _MINUTE:
        return f"{seconds:.1f} s" if seconds < 10.0 else f"{seconds:.0f} s"
    if seconds < 2 * _HOUR:
        return f"{seconds // _MINUTE:.0f} min"
    if seconds < 2 * _DAY:
        return f"{seconds // _HOUR:.0f} h {seconds % _HOUR // _MINUTE:.0f} min"
    return f"{seconds // _DAY:.0f} d {seconds % _DAY // _HOUR:.0f} h"


def ago(seconds: float | None) -> str:
    return "never" if seconds is None else f"{span(seconds)} ago"


def moment(stamp: str) -> str:
    """RFC 3339 to the minute, for reading."""
    return f"{stamp[:16].replace('T', ' ')} UTC"


def rate(per_s: float | None) -> str:
    return "rate not known yet" if per_s is None else f"{per_s:.4g} readings/s"


def ratio(loop: dict[str, Any]) -> str:
    found = loop["drift_ratio"]
    return "-" if found is None else f"{found:.2f}"


def change(loop: dict[str, Any]) -> str:
    """The worst quantity, and how far it moved where that is known."""
    name, pct = loop["worst_quantity"], loop["change_pct"]
    if name is None:
        return "-"
    return name if pct is None else f"{name} {pct:+.1f} %"


def limits(loop: dict[str, Any]) -> str:
    if loop["low_pct"] is None or loop["high_pct"] is None:
        return ""
    return f" (95 % limits {loop['low_pct']:+.1f} … {loop['high_pct']:+.1f} %)"


def alarm_name(alarm: dict[str, Any]) -> str:
    return f"{alarm['alarm']} of {alarm['signal']}" if alarm["signal"] else str(alarm["alarm"])


def counted(counts: dict[str, int]) -> str:
    return ", ".join(f"{count} {kind}" for kind, count in counts.items())
