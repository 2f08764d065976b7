"""`rtid check` says what would run, in words and as JSON."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from rtid.cli.main import main

USUAL = """\
node: packing-2
state_dir: STATE
broker: {host: 127.0.0.1, port: 1883, prefix: plant}
sources:
  drive:
    serial: {port: /dev/ttyUSB0, baud: 115200}
    decode: csv
    time: {column: 0, unit: ms}
    checksum: xor8
    signals:
      volts: {column: 1, unit: V}
      speed: {column: 2, unit: rad/s}
loops:
  conveyor:
    inputs: [drive.volts]
    output: drive.speed
    period_s: 0.01
    model: {structure: output_error, order: 2, dead_time_s: [0, 0.05]}
"""


def write(folder: Path, text: str = USUAL) -> str:
    path = folder / "node.yaml"
    path.write_text(text.replace("STATE", str(folder / "state")))
    return str(path)


def test_what_would_run_is_said_in_plain_words(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write(tmp_path)
    assert main(["check", path]) == 0
    said = capsys.readouterr().out
    for words in (
        f"{path}: good. Node packing-2, 1 source, 1 loop.",
        "source drive: serial port /dev/ttyUSB0, 115200 baud",
        "csv, checksum xor8",
        "column 0, in ms",
        "drive.speed: column 2, rad/s",
        "restarts some boards",
        "loop conveyor: drive.volts -> drive.speed",
        "period    0.01 s, blocks of 16 rows",
        "output_error, order 2; dead time found between 0 and 0.05 s (6 tried)",
        "memory    10 s = 1000 rows",
        "baseline  learnt from at least 20 s = 2000 rows",
        "gain 10 %, time constants 20 %, dead time 30 %, noise 50 %",
        "at most about one false alarm in 30 days = one in 259 200 000 rows",
        "topic     plant/packing-2/conveyor/drift",
        "topic plant/packing-2/status",
        "memory about ",
    ):
        assert words in said


def test_nothing_is_made_or_opened(tmp_path: Path) -> None:
    assert main(["check", write(tmp_path)]) == 0
    assert not (tmp_path / "state").exists()


def test_json_is_one_document_and_nothing_else(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", write(tmp_path), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["schema"] == "rtid/check/1"
    assert document["loops"]["conveyor"]["alarm_budget"]["rows_per_false_alarm"] == 259_200_000
    assert document["loops"]["conveyor"]["model"]["dead_times_tried"] == 6


def test_without_a_broker_no_topic_is_promised(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = "".join(line for line in USUAL.splitlines(keepends=True) if not line.startswith("broker"))
    assert main(["check", write(tmp_path, text)]) == 0
    said = capsys.readouterr().out
    assert "topic " not in said
    assert "broker none" in said


@pytest.mark.parametrize(
    ("change", "remark"),
    [
        ("    memory_s: 0.4\n", "memory_s 0.4 is below 50 periods"),
        ("    model: {dead_time_s: [0, 3]}\n", "dead_time_s spans 301 periods"),
    ],
)
def test_doubtful_settings_get_a_remark(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], change: str, remark: str
) -> None:
    text = USUAL.replace("    model: {structure: output_error, order: 2, dead_time_s: [0, 0.05]}\n", change)
    assert main(["check", write(tmp_path, text)]) == 0
    assert f"remark: loop conveyor: {remark}" in capsys.readouterr().out


def test_the_usual_settings_get_none(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", write(tmp_path)]) == 0
    assert "remark" not in capsys.readouterr().out


def test_a_missing_file_is_66_and_a_wrong_one_78_with_its_line(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["check", str(tmp_path / "none.yaml")]) == 66
    assert main(["check", write(tmp_path, USUAL.replace("period_s: 0.01", "period_s: fast"))]) == 78
    first, second = capsys.readouterr().err.splitlines()
    assert "none.yaml" in first
    assert "node.yaml:17" in second


def test_the_schema_of_the_configuration_is_printed_for_editors(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", "--schema"]) == 0
    assert json.loads(capsys.readouterr().out)["$schema"] == "https://json-schema.org/draft/2020-12/schema"


def test_without_a_file_the_command_line_is_wrong(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check"]) == 64
    assert "CONFIG is missing" in capsys.readouterr().err
