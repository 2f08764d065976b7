"""Readings from a serial port. rtid only listens: nothing is ever written to the port.

One thread per source opens the port, reads what waits, frames and decodes it, and comes back by itself after the
device was pulled. The thread that opened the port also closes it; `stop()` only wakes it.
"""

from __future__ import annotations

import errno
import logging
import termios
import threading
import time
from collections.abc import Callable
from pathlib import Path

from serial import Serial

from rtid.intake.framing import LineFramer
from rtid.intake.live_source import LiveSource
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Rejected
from rtid.settings import SerialPort, Source

DEVICES = Path("/dev/serial")
READ_TIMEOUT_S = 0.2
PAUSE_S = 0.01  # between reads, lets bytes gather: a tenth of the processor time, at the price of later arrival times
BACK_OFF_S = (0.5, 5.0)  # first and longest wait before the port is opened again
MANY_BYTES = 4096  # without any line end
LEAST_STEP_S = 1e-6  # between the arrival times of two lines
PORT_ERRORS = (OSError, TypeError, ValueError, termios.error)  # TypeError: pyserial, when the port goes during a read
_PARITY = {"none": "N", "even": "E", "odd": "O"}


class SerialIntake(LiveSource):
    """The live feed of one serial source. `monotonic` gives the arrival times, in seconds."""

    def __init__(
        self, source: Source, queue: ReadingQueue, *, monotonic: Callable[[], float] = time.monotonic
    ) -> None:
        if source.serial is None:
            raise ValueError(f"{source.name} has no serial port")
        super().__init__(source, queue)
        self._settings = source.serial
        self._framer = LineFramer()
        self._monotonic = monotonic
        self._pause_s = PAUSE_S if source.has_payload_time else 0.0
        self._last_read = 0.0
        self._stopping = threading.Event()
        self._port: Serial | None = None
        self._changing = threading.Lock()  # no port is woken while it closes
        self._thread = threading.Thread(target=self._run, name=f"intake-{source.name}", daemon=True)

    @property
    def alive(self) -> bool:
        """False when the reading thread has ended; for the watchdog."""
        return self._thread.is_alive()

    def skew_s(self) -> dict[str, float]:
        """Nothing: all signals of a line arrive together."""
        return {}

    def start(self) -> None:
        self._thread.start()

    def stop(self) -> None:
        """End the reading thread and wait for it; the port is closed then."""
        self._stopping.set()
        with self._changing:
            if self._port is not None:
                self._port.cancel_read()
        if self._thread.is_alive():
            self._thread.join()

    def _run(self) -> None:
        wait_s = BACK_OFF_S[0]
        while not self._stopping.is_set():
            lines_before = self.counts.messages
            try:
                self._session()
            except PORT_ERRORS as error:
                self._say(logging.WARNING, why_lost(error, self._settings.port))
            if self.counts.messages > lines_before:
                wait_s = BACK_OFF_S[0]
            self._stopping.wait(wait_s)
            wait_s = min(2 * wait_s, BACK_OFF_S[1])

    def _session(self) -> None:
        """From opening the port until it is lost (an error of PORT_ERRORS) or `stop()`."""
        port = open_port(self._settings)
        self._port = port
        try:
            self._opened()
            while not self._stopping.is_set():
                self._read(port)
                if self._pause_s:
                    self._stopping.wait(self._pause_s)
        finally:
            self.counts.connected = False
            with self._changing:
                self._port = None
                port.close()

    def _opened(self) -> None:
        self._framer.reset()
        self._last_read = self._monotonic()
        self._note_connected(f"{self._settings.port} is open")

    def _read(self, port: Serial) -> None:
        overlong = self._framer.overlong
        lines = self._framer.feed(port.read(port.in_waiting or 1))
        for _ in range(self._framer.overlong - overlong):
            self._delivery.reject(Rejected("overlong", "a line without end was dropped; is the baud rate right?"))
        self._deliver(lines)
        if self.counts.messages == 0 and self._framer.discarded > MANY_BYTES:
            self._say(logging.WARNING, "bytes arrive but no line end: is the baud rate right?")

    def _deliver(self, lines: list[bytes]) -> None:
        """Spread the arrival times evenly over the time since the last read: they always increase."""
        begin = self._last_read
        now = max(self._monotonic(), begin + LEAST_STEP_S * len(lines))
        step = (now - begin) / max(len(lines), 1)
        for i, line in enumerate(lines, start=1):
            self._delivery.take(line, arrival=begin + i * step)
        self._last_read = now


def open_port(settings: SerialPort) -> Serial:
    """The port, open for this process alone, with no line of it moved where the platform allows that.

    The control lines are set before opening: raising them restarts some boards. Raises one of PORT_ERRORS.
    """
    port = Serial()
    port.port = settings.port
    port.baudrate = settings.baud
    port.bytesize = settings.byte_size
    port.parity = _PARITY[settings.parity]
    port.stopbits = settings.stop_bits
    port.timeout = READ_TIMEOUT_S
    port.exclusive = True
    port.dsrdtr = port.rtscts = port.xonxoff = False
    port.dtr = port.rts = False
    port.open()
    return port


def why_lost(error: BaseException, port: str) -> str:
    """What happened to the port, in words that lead to the mend."""
    number = getattr(error, "errno", None)
    if number == errno.ENOENT:
        return f"no such port {port}; these are present: {', '.join(port_names()) or 'none'}"
    if number in (errno.EACCES, errno.EPERM):
        return f"no permission for {port}: add the user to group dialout"
    if number in (errno.EAGAIN, errno.EBUSY):
        return f"{port} is in use by another program"
    if "returned no data" in str(error):
        return f"{port} announces data and gives none: it was unplugged, or a second program reads it"
    return f"{port} cannot be read ({error}): was it unplugged? rtid goes on trying"


def port_names(devices: Path = DEVICES) -> list[str]:
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
    return f"opening {port} restarts some boards: connect an isolated line on which rtid only receives"
