"""The same readings with the same times give the same digits, live and in replay."""

from __future__ import annotations

import csv
import json
import logging
import threading
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pytest

from rtid import config
from rtid.cli.main import main
from rtid.intake.decode import Decoder
from rtid.report import Report, Transition
from rtid.service.service import Service
from rtid.settings import Source
from tests.support.plant_lines import PERIOD_S, configure, plant_rows
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until

ROWS = 4100  # not a whole number of blocks


class Reports:
    """An observer that keeps every report."""

    def __init__(self) -> None:
        self.all: list[Report] = []

    def report(self, report: Report) -> None:
        self.all.append(report)

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        pass


def live(path: Path, board: PtyDevice, lines: list[bytes], *, caplog: pytest.LogCaptureFixture) -> list[Report]:
    """What the service in this process reports on the lines of a board, its last block closed."""
    reports = Reports()
    service = Service(config.load(path), observers=[reports])
    running = threading.Thread(target=service.run)
    running.start()
    try:
        wait_until(lambda: "is open" in caplog.text, what="an open port")
        board.stream([b"half a line", *lines])
        wait_until(lambda: reports.all and reports.all[-1].time_s >= (ROWS - 20) * PERIOD_S, what="the last reading")
    finally:
        service.stop()
        running.join()
    return reports.all


def record(path: Path, source: Source, *, lines: list[bytes], until_s: float) -> None:
    """What the service decodes from these lines, as a recorded file."""
    decoder = Decoder(source)
    names = [signal.name for signal in source.signals]
    with path.open("w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(["time_s", *names])
        for line in lines:
            (reading,), _ = decoder.decode(line, arrival=0.0)
            if reading.time <= until_s:
                writer.writerow([repr(value) for value in (reading.time, *(reading.values[name] for name in names))])


def as_cells(report: Report) -> dict[str, str]:
    """What a row of the trend says of this report."""
    cells = {"time_s": repr(report.time_s), "state": report.state, "drift_ratio": cell(report.drift.ratio)}
    for name, quantity in report.quantities.items():
        cells |= {name: cell(quantity.value), f"{name}_low": cell(quantity.low), f"{name}_high": cell(quantity.high)}
    return cells


def cell(value: float | None) -> str:
    return "" if value is None else repr(float(value))


def test_live_equals_replay_to_the_last_digit(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    caplog.set_level(logging.INFO)
    lines = plant_rows(ROWS)
    with PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port)
        reports = live(path, board, lines, caplog=caplog)
    recorded = tmp_path / "drive.csv"
    end_s = reports[-1].time_s
    record(recorded, config.load(path).sources["drive"], lines=lines, until_s=end_s + PERIOD_S / 2)
    out = tmp_path / "out"
    assert main(["replay", str(path), "--feed", f"drive={recorded}", "--out", str(out)]) == 0
    with (out / "belt.trend.csv").open() as file:
        trend = list(csv.DictReader(file))
    due = [as_cells(report) for report in reports if report.due]
    assert [{key: row[key] for key in cells} for row, cells in zip(trend, due, strict=True)] == due
    snapshot = json.loads((out / "belt.snapshot.json").read_text())
    assert snapshot["samples"] == reports[-1].samples
    assert reports[-1].quantities["gain"].value is not None
