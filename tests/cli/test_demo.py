"""`rtid demo` sees its own plant drift; the story is told by what the service reports, nothing else."""

from __future__ import annotations

import io
import signal
from pathlib import Path

import pytest

from rtid.cli.demo_configuration import configuration
from rtid.cli.demo_story import Story, comparison
from rtid.cli.main import main
from rtid.cli.plant_feed import PlantFeed, csv_line
from rtid.config import load
from rtid.intake.decode import Decoder
from rtid.plants.conveyor import Ageing
from rtid.plants.motor import Motor
from tests.support.process import RunningRtid, rtid
from tests.support.reports import make_report, make_transition

AGEING = Ageing(start_s=50.0, length_s=15.0)


def story() -> tuple[Story, io.StringIO]:
    out = io.StringIO()
    return Story(out, ageing=AGEING, rows_wanted=3000), out


def test_the_whole_demo_sees_the_drift_and_leaves_nothing(tmp_path: Path) -> None:
    ended = rtid("demo", "--seconds", "90", "--speed", "10", "--seed", "2", variables={"TMPDIR": str(tmp_path)})
    assert ended.returncode == 0, ended.stdout + ended.stderr
    for words in (
        "data arrive",
        "learning: ",
        "baseline learnt: gain ",
        "the plant now changes: bearing friction and winding temperature rise",
        "drift ratio ",
        "ALARM plant_drift active",
        '"schema": "rtid/snapshot/1"',
        "true value",
        "not for automatic use",
    ):
        assert words in ended.stdout
    assert ended.stderr == ""
    assert list(tmp_path.iterdir()) == []


def test_ctrl_c_ends_it_and_leaves_nothing(tmp_path: Path) -> None:
    with RunningRtid("demo", variables={"TMPDIR": str(tmp_path)}) as demo:
        demo.wait_for_line("data arrive")
        assert demo.end(signal.SIGINT) == 130
    assert list(tmp_path.iterdir()) == []
    assert demo.stderr == []


@pytest.mark.parametrize("option", [["--seconds", "59"], ["--speed", "0"], ["--speed", "fast"]])
def test_a_duration_without_room_or_a_strange_speed_is_refused(
    option: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["demo", *option]) == 64
    assert capsys.readouterr().err.count("\n") == 1


def test_a_run_without_drift_ends_with_1() -> None:
    told, out = story()
    told.tell([make_report(state="watching")], 60.0)
    assert told.close() == 1
    assert "The drift was not alarmed in this run." in out.getvalue()


def test_an_alarm_before_the_change_does_not_count() -> None:
    told, _ = story()
    told.tell([make_transition(alarm="plant_drift")], 40.0)
    assert told.close() == 1


def test_an_alarm_after_the_change_counts_and_is_told() -> None:
    told, out = story()
    told.tell([], 50.0)
    told.tell([make_transition(alarm="plant_drift", text="gain fell by 21 %")], 60.0)
    assert told.close() == 0
    assert "ALARM plant_drift active: gain fell by 21 %" in out.getvalue()


def test_progress_is_one_line_per_five_seconds() -> None:
    told, out = story()
    for second in range(20):
        told.tell([make_report(state="learning", samples=100 * second)], float(second))
    assert sum("learning: " in line for line in out.getvalue().splitlines()) == 4


def test_the_estimates_stand_beside_the_truth() -> None:
    motor = Motor()
    assert motor.time_constants_s is not None
    found = {"gain": {"value": 2.01, "low": 1.99, "high": 2.03}, "time_constant_1": {"value": None}}
    lines = comparison({"quantities": found}, motor).splitlines()
    assert lines[1].split() == ["gain", "2.01", "1.99", "to", "2.03", "2"]
    assert lines[4].split()[:2] == ["time_constant_1", "unknown"]
    assert lines[4].split()[-1] == f"{motor.time_constants_s[0]:.3g}"


def test_the_configuration_of_the_demo_reads_its_own_lines(tmp_path: Path) -> None:
    path = tmp_path / "node.yaml"
    path.write_text(configuration("/dev/none", state_dir=tmp_path / "state", baseline_s=30.0))
    source = load(path).sources["drive"]
    (reading,), rejected = Decoder(source).decode(csv_line((1.23, 12.0, 21.5)).rstrip(), arrival=0.0)
    assert rejected == []
    assert reading.time == pytest.approx(1.23)
    assert dict(reading.values) == {"drive.volts": 12.0, "drive.speed": 21.5}


def test_the_feed_sends_every_row_once_and_in_order() -> None:
    rows = ((0.01 * k, 1.0, float(k)) for k in range(10**6))
    with PlantFeed(lambda: next(rows), period_s=0.002) as feed, open(feed.port, "rb", buffering=0) as port:
        feed.start()
        received = b""
        while received.count(b"\n") < 50:
            received += port.read(4096)
    times = [int(line.split(b",")[0]) for line in received.split(b"\r\n")[:-1]]
    assert times == list(range(0, 10 * len(times), 10))
