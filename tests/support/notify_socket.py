"""A service manager that only listens: the socket behind NOTIFY_SOCKET, and what was said there."""

from __future__ import annotations

import contextlib
import socket
import threading
from types import TracebackType
from typing import Self

from tests.support.wait import wait_until


class NotifySocket:
    """`with NotifySocket(str(folder / "notify")) as manager:`; a name that begins with '@' is abstract."""

    def __init__(self, name: str) -> None:
        self.name = name
        self.messages: list[dict[str, str]] = []  # one per datagram: its variables

    def __enter__(self) -> Self:
        self._socket = socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM)
        self._socket.bind("\0" + self.name[1:] if self.name.startswith("@") else self.name)
        self._socket.settimeout(0.05)
        self._ending = threading.Event()
        self._reader = threading.Thread(target=self._listen, daemon=True)
        self._reader.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self._ending.set()
        self._reader.join()
        self._socket.close()
        if error is not None:
            error.add_note(f"the manager heard: {self.messages}")

    @property
    def variables(self) -> dict[str, str]:
        """What systemd sets for a service that it waits for."""
        return {"NOTIFY_SOCKET": self.name}

    @property
    def order(self) -> list[str]:
        """What was said, in order, without status lines and pings."""
        return [name for message in self.messages for name in message if name in {"READY", "RELOADING", "STOPPING"}]

    def count(self, name: str) -> int:
        return sum(name in message for message in self.messages)

    def last(self, name: str) -> str:
        """The value that was said last; empty when it never was."""
        return next((message[name] for message in reversed(self.messages) if name in message), "")

    def wait_for(self, name: str, *, times: int = 1, seconds: float = 20.0) -> None:
        wait_until(lambda: self.count(name) >= times, seconds, what=f"{times} times {name}")

    def _listen(self) -> None:
        while not self._ending.is_set():
            with contextlib.suppress(TimeoutError):
                text = self._socket.recv(65536).decode()
                self.messages.append(dict(line.split("=", 1) for line in text.split("\n")))
