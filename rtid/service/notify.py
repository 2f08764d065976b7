"""What the service tells the service manager: the protocol of sd_notify(3), one datagram a message.

Without NOTIFY_SOCKET in the environment nobody listens, and every call does nothing.
"""

from __future__ import annotations

import logging
import os
import socket
import time
from collections.abc import Mapping

WATCHDOG_SHARE = 0.25  # of WATCHDOG_USEC between two pings: half is the limit, and a turn of the worker takes a while
SEND_S = 1.0  # longest wait for a manager whose socket is full

log = logging.getLogger("rtid.service")


class Notifier:
    """Tells the manager how the service does. Never raises: a manager that cannot be reached is logged."""

    def __init__(self, environ: Mapping[str, str] = os.environ) -> None:
        self._address = environ.get("NOTIFY_SOCKET", "")
        self._ping_every_s = WATCHDOG_SHARE * _watchdog_s(environ) if self._address else 0.0
        self._pinged = -float("inf")
        self._status = ""

    def ready(self) -> None:
        """Started, or reloaded: the service does its work from now on."""
        self._send("READY=1")

    def reloading(self) -> None:
        """The configuration is read anew; `ready()` ends it, whether the new one was taken or refused."""
        self._send(f"RELOADING=1\nMONOTONIC_USEC={time.monotonic_ns() // 1000}")

    def stopping(self) -> None:
        self._send("STOPPING=1")

    def status(self, text: str) -> None:
        """One line for people, as `systemctl status` shows it; sent when it changed."""
        line = " ".join(text.split())
        if line != self._status:
            self._status = line
            self._send(f"STATUS={line}")

    def alive(self, now: float) -> None:
        """Feed the watchdog when that is due. Called by the worker in its own turn, with data or without: a timer
        would go on telling of a worker that hangs. `now` is the monotonic clock in seconds."""
        if self._ping_every_s and now - self._pinged >= self._ping_every_s:
            self._pinged = now
            self._send("WATCHDOG=1")

    def _send(self, message: str) -> None:
        if not self._address:
            return
        try:
            with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as sender:
                sender.settimeout(SEND_S)
                sender.sendto(message.encode(), _address(self._address))
        except OSError as error:
            log.warning("the service manager at %s cannot be told %s: %s", self._address, message.split("=")[0], error)


def in_words(states: Mapping[str, str]) -> str:
    """The states of the loops in one line: `watching: conveyor, oven; learning: mill`."""
    names: dict[str, list[str]] = {}
    for loop, state in states.items():
        names.setdefault(state, []).append(loop)
    return "; ".join(f"{state}: {', '.join(loops)}" for state, loops in names.items())


def _address(name: str) -> str:
    """'@' at the beginning stands for the zero byte of an abstract socket (unix(7))."""
    return "\0" + name[1:] if name.startswith("@") else name


def _watchdog_s(environ: Mapping[str, str]) -> float:
    """The manager's patience in seconds; 0 when it has no watchdog, or none for this process."""
    wanted, pid = environ.get("WATCHDOG_USEC", ""), environ.get("WATCHDOG_PID", "")
    if not wanted.isdecimal() or pid not in {"", str(os.getpid())}:
        return 0.0
    return int(wanted) / 1e6
