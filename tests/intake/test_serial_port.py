"""The serial source on real pseudo-terminals: rate, garbage, pull and replug, a second opener."""

from __future__ import annotations

import errno
import logging
import termios
from collections.abc import Iterator
from pathlib import Path

import pytest
from serial import Serial, SerialException

from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Reading
from rtid.intake.serial_port import SerialIntake, open_port, port_names, reset_warning, why_lost
from rtid.settings import Place, SerialPort, Source, TimeField
from tests.support.pty import PtyDevice
from tests.support.running_source import RunningSource
from tests.support.sources import signal, source
from tests.support.wait import wait_until


@pytest.fixture
def device(tmp_path: Path) -> Iterator[PtyDevice]:
    with PtyDevice(tmp_path / "board") as plugged:
        yield plugged


@pytest.fixture(autouse=True)
def _short_back_off(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("rtid.intake.serial_port.BACK_OFF_S", (0.02, 0.1))


def drive(port: str, *, payload_time: bool = False) -> Source:
    time = TimeField(Place(column=0), "ms") if payload_time else None
    return source("csv", signal("drive.volts", column=1), serial=SerialPort(port), time=time)


class Running(RunningSource):
    """A started source on a port."""

    intake: SerialIntake

    def __init__(self, of: Source) -> None:
        queue = ReadingQueue()
        super().__init__(SerialIntake(of, queue), queue)

    def wait_connected(self) -> None:
        wait_until(lambda: self.intake.connected, what="the port is open")


def test_every_line_of_a_fast_device_comes_through_in_order(device: PtyDevice) -> None:
    with Running(drive(device.port, payload_time=True)) as running:
        running.wait_connected()
        device.send(b"half a line\n")
        for begin in range(0, 2000, 100):
            device.send(b"".join(b"%d,%d\n" % (i, i) for i in range(begin, begin + 100)))
            running.wait_for(begin + 100)
        assert [reading.values["drive.volts"] for reading in running.readings] == list(range(2000))
        assert [reading.time for reading in running.readings] == pytest.approx([i / 1000 for i in range(2000)])
        assert running.intake.counts.rejected == {}
        assert running.intake.skew_s() == {}


def test_arrival_times_increase_strictly_within_one_read(device: PtyDevice) -> None:
    with Running(drive(device.port)) as running:
        running.wait_connected()
        device.send(b"\n" + b"".join(b"0,%d\n" % i for i in range(300)))
        times = [reading.time for reading in running.wait_for(300)]
        assert all(later > earlier for earlier, later in zip(times, times[1:], strict=False))
        assert times == [reading.arrival for reading in running.readings]
        assert running.intake.counts.last_arrival == times[-1]


def test_lines_of_one_read_are_spread_evenly_since_the_read_before(device: PtyDevice) -> None:
    intake = SerialIntake(drive(device.port), queue := ReadingQueue(), monotonic=lambda: 10.0)
    intake._last_read = 6.0
    intake._deliver([b"0,1", b"0,2", b"0,3", b"0,4"])
    assert [item.time for item in queue.get(0.0) if isinstance(item, Reading)] == [7.0, 8.0, 9.0, 10.0]


def test_clock_that_stands_still_gives_increasing_times(device: PtyDevice) -> None:
    intake = SerialIntake(drive(device.port), queue := ReadingQueue(), monotonic=lambda: 10.0)
    intake._last_read = 10.0
    intake._deliver([b"0,1"])
    intake._deliver([b"0,2"])
    first, second = (item.time for item in queue.get(0.0) if isinstance(item, Reading))
    assert 10.0 < first < second


def test_garbage_costs_its_own_line_only(device: PtyDevice) -> None:
    with Running(drive(device.port)) as running:
        running.wait_connected()
        device.send(b"\n0,1\n\x00\xff\x80\n0,1_0\n0\n" + b"x" * 2000)
        device.send(b"x" * 2500 + b"\n0,2\r\n")
        assert [reading.values["drive.volts"] for reading in running.wait_for(2)] == [1.0, 2.0]
        assert running.intake.counts.rejected == {"garbled": 1, "number": 1, "columns": 1, "overlong": 1}
        assert running.intake.counts.messages == 5


def test_pulled_and_plugged_in_again_under_the_same_name(
    device: PtyDevice, caplog: pytest.LogCaptureFixture
) -> None:
    with caplog.at_level(logging.INFO, "rtid.intake"), Running(drive(device.port)) as running:
        running.wait_connected()
        device.send(b"\n0,1\n0,")
        running.wait_for(1)
        device.pull()
        wait_until(lambda: not running.intake.connected, what="the loss is noticed")
        wait_until(lambda: "no such port" in caplog.text, what="the port is looked for again")
        device.plug()
        running.wait_connected()
        device.send(b"9\n0,2\n")
        assert [reading.values["drive.volts"] for reading in running.wait_for(2)] == [1.0, 2.0]
        assert running.intake.counts.reconnects == 1
        assert running.intake.alive
    assert caplog.text.count("is open") == 2
    assert caplog.text.count("no such port") == 1


def test_second_opener_is_refused_and_says_so(device: PtyDevice, caplog: pytest.LogCaptureFixture) -> None:
    with Running(drive(device.port)) as first, Running(drive(device.port)) as second:
        wait_until(lambda: "in use by another program" in caplog.text, what="the refusal")
        assert [first.intake.connected, second.intake.connected].count(True) == 1


def test_port_that_is_not_there_at_the_start_is_waited_for(tmp_path: Path) -> None:
    device = PtyDevice(tmp_path / "late")
    with Running(drive(device.port)) as running, device:
        running.wait_connected()
        assert running.intake.counts.reconnects == 0


def test_nothing_is_ever_written_to_the_device(device: PtyDevice) -> None:
    with Running(drive(device.port)) as running:
        running.wait_connected()
        device.send(b"\n0,1\n")
        running.wait_for(1)
    assert device.heard() == b""


def test_bytes_without_any_line_end_are_remarked(device: PtyDevice, caplog: pytest.LogCaptureFixture) -> None:
    with Running(drive(device.port)) as running:
        running.wait_connected()
        device.send(b"\x55" * 3000)
        wait_until(lambda: running.intake._framer.discarded == 3000, what="the first bytes are read")
        device.send(b"\x55" * 3000)
        wait_until(lambda: "is the baud rate right?" in caplog.text, what="the remark")


def test_fault_in_decoding_does_not_end_the_thread(device: PtyDevice, monkeypatch: pytest.MonkeyPatch) -> None:
    with Running(drive(device.port)) as running:
        running.wait_connected()
        with monkeypatch.context() as patch:
            patch.setattr("rtid.intake.decode.Decoder._messages", lambda self, payload: 1 // 0)
            device.send(b"\n0,1\n")
            wait_until(lambda: running.intake.counts.rejected == {"internal": 1}, what="the fault is counted")
        device.send(b"0,2\n")
        assert running.wait_for(1)[0].values == {"drive.volts": 2.0}


def test_control_lines_and_flow_control_are_off_before_opening(
    device: PtyDevice, monkeypatch: pytest.MonkeyPatch
) -> None:
    seen: list[tuple[bool, ...]] = []
    monkeypatch.setattr(Serial, "open", lambda port: seen.append(
        (port.dtr, port.rts, port.dsrdtr, port.rtscts, port.xonxoff, port.exclusive)))
    open_port(SerialPort(device.port))
    assert seen == [(False, False, False, False, False, True)]


def test_port_settings_reach_the_device(device: PtyDevice) -> None:
    with open_port(SerialPort(device.port, baud=9600, byte_size=7, parity="even", stop_bits=2)) as port:
        _, _, control, _, speed, *_ = termios.tcgetattr(port.fileno())
    assert speed == termios.B9600
    assert control & termios.CSTOPB


@pytest.mark.parametrize(
    ("error", "words"),
    [
        (SerialException(errno.ENOENT, "could not open port"), "no such port /dev/x; these are present: "),
        (SerialException(errno.EACCES, "could not open port"), "add the user to group dialout"),
        (SerialException(errno.EBUSY, "could not open port"), "in use by another program"),
        (SerialException(errno.EAGAIN, "could not lock"), "in use by another program"),
        (SerialException("device reports readiness to read but returned no data"), "unplugged, or a second program"),
        (OSError(errno.EIO, "Input/output error"), "was it unplugged?"),
        (TypeError("'NoneType' object cannot be interpreted as an integer"), "was it unplugged?"),
    ],
)
def test_loss_is_told_in_words_that_lead_to_the_mend(error: Exception, words: str) -> None:
    text = why_lost(error, "/dev/x")
    assert words in text
    assert "/dev/x" in text
    assert "\n" not in text


def test_port_names_go_by_identity_and_else_by_place(tmp_path: Path) -> None:
    assert port_names(tmp_path) == []
    (tmp_path / "by-path").mkdir()
    (tmp_path / "by-path" / "usb-0:1").touch()
    assert port_names(tmp_path) == [str(tmp_path / "by-path" / "usb-0:1")]
    (tmp_path / "by-id").mkdir()
    (tmp_path / "by-id" / "board-b").touch()
    (tmp_path / "by-id" / "board-a").touch()
    assert port_names(tmp_path) == [str(tmp_path / "by-id" / name) for name in ("board-a", "board-b")]


def test_reset_warning_names_the_port_and_the_way_out() -> None:
    text = reset_warning(drive("/dev/x"))
    assert "/dev/x restarts some boards" in text
    assert "only receives" in text
