"""A real broker on a free loopback port, and a small client that collects what is published on it.

On a machine without mosquitto the pure-Python broker of the test extra stands in. It speaks MQTT 3.1.1 only, so tests
of rtid's own clients (MQTT 5) ask for the fixture `mqtt5_broker`, which skips there.
"""

from __future__ import annotations

import base64
import hashlib
import os
import random
import shutil
import socket
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import paho.mqtt.client as paho
import paho.mqtt.publish as paho_publish
from paho.mqtt.enums import CallbackAPIVersion

START_S = 20.0
# Below the range from which the system picks outgoing ports: a client that keeps trying a stopped broker must not
# meet itself there.
PORTS = (20000, 32000)


def mosquitto() -> str | None:
    """Path of the real broker, None where it is not installed."""
    debian = Path("/usr/sbin/mosquitto")
    return shutil.which("mosquitto") or (str(debian) if debian.exists() else None)


def free_port() -> int:
    """A loopback port on which nobody listens at the moment."""
    while True:
        port = random.SystemRandom().randrange(*PORTS)
        with socket.socket() as probe:
            probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            try:
                probe.bind(("127.0.0.1", port))
            except OSError:
                continue
            return port


class Broker:
    """`with Broker() as broker:` runs a broker on `broker.port`; what it retained is gone after `restart()`.

    `users` (name to password) closes it to everybody else; `more` are further lines of mosquitto's configuration.
    """

    def __init__(
        self, port: int | None = None, *, users: Mapping[str, str] | None = None, more: Sequence[str] = ()
    ) -> None:
        self.port = port or free_port()
        self._users = users
        self._more = tuple(more)
        self._folder = tempfile.TemporaryDirectory(prefix="rtid-broker-")
        self._process: subprocess.Popen[bytes] | None = None
        if (users is not None or more) and mosquitto() is None:
            raise RuntimeError("the fallback broker cannot be configured: install mosquitto")

    def __enter__(self) -> Self:
        self.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.stop()
        self._folder.cleanup()

    def start(self) -> None:
        """Start it and wait until it accepts connections."""
        with self._log.open("ab") as log:
            self._process = subprocess.Popen(self._command(), stdout=log, stderr=log)
        deadline = time.monotonic() + START_S
        while not self._accepts():
            if self._process.poll() is not None or time.monotonic() > deadline:
                self.kill()
                raise RuntimeError(f"the test broker did not start: {self._log.read_text(errors='replace')}")
            time.sleep(0.01)

    def stop(self) -> None:
        """End it in good order."""
        self._end(lambda process: process.terminate())

    def kill(self) -> None:
        """End it as a power failure does."""
        self._end(lambda process: process.kill())

    def restart(self) -> None:
        """Stop it and start it again on the same port."""
        self.stop()
        self.start()

    @property
    def pid(self) -> int:
        """Process number of the running broker."""
        if self._process is None:
            raise RuntimeError("the broker is not running")
        return self._process.pid

    @property
    def _log(self) -> Path:
        return Path(self._folder.name, "broker.log")

    def _command(self) -> list[str]:
        program = mosquitto()
        if program is None:
            return [sys.executable, str(Path(__file__).with_name("fallback_broker.py")), str(self.port)]
        return [program, "-c", str(self._configuration())]

    def _configuration(self) -> Path:
        lines = [f"listener {self.port} 127.0.0.1", "persistence false", "log_dest stderr", *self._more]
        lines.append(f"allow_anonymous {'true' if self._users is None else 'false'}")
        if os.geteuid() == 0:
            lines.append("user root")
        if self._users is not None:
            passwords = Path(self._folder.name, "passwords")
            passwords.write_text("".join(password_line(*user) for user in self._users.items()))
            lines.append(f"password_file {passwords}")
        path = Path(self._folder.name, "mosquitto.conf")
        path.write_text("\n".join(lines) + "\n")
        return path

    def _accepts(self) -> bool:
        try:
            socket.create_connection(("127.0.0.1", self.port), timeout=1.0).close()
        except OSError:
            return False
        return True

    def _end(self, how: Callable[[subprocess.Popen[bytes]], None]) -> None:
        if self._process is None:
            return
        how(self._process)
        try:
            self._process.wait(timeout=10.0)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()
        self._process = None


def password_line(name: str, password: str) -> str:
    """One line of a mosquitto password file: PBKDF2 with SHA-512."""
    salt, rounds = os.urandom(12), 101
    digest = hashlib.pbkdf2_hmac("sha512", password.encode(), salt, rounds)
    return f"{name}:$7${rounds}${base64.b64encode(salt).decode()}${base64.b64encode(digest).decode()}\n"


@dataclass(frozen=True, slots=True)
class Message:
    """`retain` is true only for a message that the broker had kept when the listener came."""

    topic: str
    payload: bytes
    retain: bool
    qos: int


class Listener:
    """`with Listener(port) as listener:` collects every message on `topic`; subscribed once the block is entered."""

    def __init__(self, port: int, topic: str = "#", *, qos: int = 2) -> None:
        self.messages: list[Message] = []
        self._port, self._topic, self._qos = port, topic, qos
        self._news = threading.Condition()
        self._subscribed = threading.Event()
        self._client = paho.Client(CallbackAPIVersion.VERSION2)
        self._client.on_connect = self._on_connect
        self._client.on_subscribe = self._on_subscribe
        self._client.on_message = self._on_message
        self._client.reconnect_delay_set(min_delay=1, max_delay=1)

    def __enter__(self) -> Self:
        self._client.connect("127.0.0.1", self._port)
        self._client.loop_start()
        if not self._subscribed.wait(10.0):
            raise AssertionError("the listener could not subscribe")
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self._client.disconnect()
        self._client.loop_stop()

    def wait_for(self, predicate: Callable[[Message], object], seconds: float = 10.0) -> Message:
        """The first message, already here or still to come, for which `predicate(message)` is true."""
        found: list[Message] = []

        def search() -> bool:
            found.extend(m for m in self.messages if predicate(m))
            return bool(found)

        with self._news:
            if not self._news.wait_for(search, seconds):
                seen = ", ".join(sorted({m.topic for m in self.messages}))
                raise AssertionError(f"no such message within {seconds:g} s; seen on: {seen or 'no topic'}")
        return found[0]

    def on(self, topic: str) -> list[Message]:
        """What came on one topic so far, oldest first."""
        with self._news:
            return [m for m in self.messages if m.topic == topic]

    def _on_connect(self, *_: object) -> None:
        self._client.subscribe(self._topic, self._qos)

    def _on_subscribe(self, *_: object) -> None:
        self._subscribed.set()

    def _on_message(self, client: paho.Client, data: Any, message: paho.MQTTMessage) -> None:
        with self._news:
            self.messages.append(Message(message.topic, bytes(message.payload), message.retain, message.qos))
            self._news.notify_all()


def publish(port: int, topic: str, payload: str | bytes, *, retain: bool = False, qos: int = 0) -> None:
    """Publish one message and return when the broker has it."""
    paho_publish.single(topic, payload, qos=qos, retain=retain, hostname="127.0.0.1", port=port)
