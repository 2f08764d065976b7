"""The trend as a reader of CSV sees it."""

from __future__ import annotations

import csv
import math
from pathlib import Path
from typing import Any

import pytest

from rtid.errors import CannotCreate, InputOutputError
from rtid.publish.trend import TrendFile
from rtid.report import Drift, Quantity
from tests.support.reports import make_report

NAMES = ("gain", "dead_time")


def written(path: Path, *reports: Any) -> list[dict[str, str]]:
    with TrendFile(path, NAMES) as trend:
        for report in reports:
            trend.row(report)
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def test_header_is_that_of_the_contract(tmp_path: Path) -> None:
    written(tmp_path / "t.csv")
    assert (tmp_path / "t.csv").read_text() == (
        "time_s,state,health,drift_ratio,worst_quantity,gain,gain_low,gain_high,"
        "dead_time,dead_time_low,dead_time_high,detectable_gain_pct\n"
    )


def test_row_holds_the_report(tmp_path: Path) -> None:
    (row,) = written(tmp_path / "t.csv", make_report())
    assert row == {
        "time_s": "120.0", "state": "watching", "health": "out_of_specification", "drift_ratio": "1.4",
        "worst_quantity": "gain", "gain": "2.0", "gain_low": "1.98", "gain_high": "2.02",
        "dead_time": "", "dead_time_low": "", "dead_time_high": "", "detectable_gain_pct": "3.0",
    }  # fmt: skip


def test_only_reports_that_are_due_become_rows(tmp_path: Path) -> None:
    rows = written(tmp_path / "t.csv", *(make_report(time_s=float(t), due=t % 3 == 0) for t in range(7)))
    assert [row["time_s"] for row in rows] == ["0.0", "3.0", "6.0"]


def test_unknown_is_an_empty_cell(tmp_path: Path) -> None:
    unknown = Quantity(math.nan, None, math.inf, None, "")
    (row,) = written(tmp_path / "t.csv", make_report(drift=Drift(), quantities={"gain": unknown}))
    assert {key for key, cell in row.items() if cell} == {"time_s", "state", "health"}


@pytest.mark.parametrize("number", [0.1 + 0.2, 1e-320, -1.7976931348623157e308, 123456789.123456789])
def test_numbers_read_back_as_the_same_float(tmp_path: Path, number: float) -> None:
    (row,) = written(tmp_path / "t.csv", make_report(time_s=number))
    assert float(row["time_s"]) == number


def test_folder_that_is_missing_is_named(tmp_path: Path) -> None:
    with pytest.raises(CannotCreate, match="no-such-folder/t.csv: cannot be created"):
        TrendFile(tmp_path / "no-such-folder" / "t.csv", NAMES)


def test_full_disk_is_one_line() -> None:
    trend = TrendFile("/dev/full", NAMES)
    with pytest.raises(InputOutputError, match=r"^/dev/full: cannot be written \(No space left on device\)"):
        trend.close()
