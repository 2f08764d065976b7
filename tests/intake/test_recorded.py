from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtid.errors import DataError, InputOutputError, MissingInput, UsageError
from rtid.intake.reading import Reading
from rtid.intake.recorded import MAX_LINE, CsvLayout, RecordedFeed, merge

SIGNALS = ("drive.volts", "drive.speed")


def feed(
    path: Path, text: str | bytes, *, name: str = "drive", restart_after_s: float = 10.0, **layout: Any
) -> RecordedFeed:
    """A feed of source `name` over a file that holds `text`."""
    path = path / f"{name}.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    signals = tuple(f"{name}.{signal.partition('.')[2]}" for signal in SIGNALS)
    return RecordedFeed(name, path, signals=signals, layout=CsvLayout(**layout), restart_after_s=restart_after_s)


def times(of: RecordedFeed) -> list[float]:
    return [reading.time for reading in of]


def test_rows_become_readings_in_file_order(tmp_path: Path) -> None:
    recorded = feed(tmp_path, "time_s,drive.volts,speed,remark\n0,1,-2.5e0,started\n0.01,2,3,\n")
    assert list(recorded) == [
        Reading("drive", 0.0, {"drive.volts": 1.0, "drive.speed": -2.5}),
        Reading("drive", 0.01, {"drive.volts": 2.0, "drive.speed": 3.0}),
    ]
    assert (recorded.counts.messages, recorded.counts.readings, recorded.fraction()) == (2, 2, 1.0)


def test_byte_order_mark_crlf_blank_lines_and_missing_last_newline_are_accepted(tmp_path: Path) -> None:
    recorded = feed(tmp_path, b"\xef\xbb\xbftime_s, volts\r\n0,1\r\n\r\n1, 2\r\n2,3")
    assert times(recorded) == [0.0, 1.0, 2.0]
    assert recorded.counts.rejected == {}


def test_empty_cell_is_an_absent_signal_and_no_rejection(tmp_path: Path) -> None:
    recorded = feed(tmp_path, "time_s,volts,speed\n0,,2\n1,,\n2,3,\n")
    assert [dict(reading.values) for reading in recorded] == [{"drive.speed": 2.0}, {"drive.volts": 3.0}]
    assert recorded.counts.rejected == {}


def test_rows_that_do_not_parse_are_counted_per_kind_with_their_first_line(tmp_path: Path) -> None:
    rows = ["0,1", "1,x", "2", "3,1_0", "4,nan", "5,1,2", "x,1", ",1", "6,1e400", '"7",1', "8,\u0661", "9,1"]
    recorded = feed(tmp_path, "time_s,volts\n" + "\n".join(rows) + "\n")
    assert times(recorded) == [0.0, 9.0]
    assert recorded.counts.rejected == {"number": 5, "columns": 2, "time": 3}
    assert recorded.first_line == {"number": 3, "columns": 4, "time": 8}
    assert recorded.counts.first_rejected["number"] == f"{tmp_path}/drive.csv:3: 'x' is not a number"


def test_row_whose_time_runs_backwards_is_rejected_and_the_next_good_one_is_used(tmp_path: Path) -> None:
    recorded = feed(tmp_path, "time_s,volts\n0,1\n5,1\n4,1\n5,1\n6,1\n")
    assert times(recorded) == [0.0, 5.0, 5.0, 6.0]
    assert recorded.first_line == {"time": 4}


def test_long_step_back_is_left_to_the_grid(tmp_path: Path) -> None:
    recorded = feed(tmp_path, "time_s,volts\n100,1\n101,1\n0,1\n1,1\n", restart_after_s=10.0)
    assert times(recorded) == [100.0, 101.0, 0.0, 1.0]


def test_overlong_line_is_rejected_without_being_held(tmp_path: Path) -> None:
    recorded = feed(tmp_path, "time_s,volts\n0,1\n1," + "1" * (3 * MAX_LINE) + "\n2,1\n")
    assert times(recorded) == [0.0, 2.0]
    assert recorded.first_line == {"length": 3}


def test_other_layout_as_declared(tmp_path: Path) -> None:
    lines = ["Zeit;volts;speed", "01.02.1970 00:00:00;1,5;-2", "01.02.1970 00:00:01;;3e1", "31.02.1970;1;1"]
    recorded = feed(tmp_path, "\n".join(lines),
                    separator=";", decimal=",", time_format="%d.%m.%Y %H:%M:%S", time_column="Zeit")
    assert [(reading.time, dict(reading.values)) for reading in recorded] == [
        (31 * 86400.0, {"drive.volts": 1.5, "drive.speed": -2.0}),
        (31 * 86400.0 + 1, {"drive.speed": 30.0}),
    ]
    assert recorded.counts.rejected == {"time": 1}


def test_point_in_a_number_with_decimal_comma_is_refused(tmp_path: Path) -> None:
    recorded = feed(tmp_path, "time_s;volts\n0;1.500\n1;1,5\n", separator=";", decimal=",")
    assert times(recorded) == [1.0]


@pytest.mark.parametrize(
    ("header", "words"),
    [
        ("zeit,volts", "one time column 'time_s'"),
        ("time_s,time_s,volts", "one time column 'time_s'"),
        ("time_s,pressure", "a column for at least one of volts, speed"),
        ("time_s;volts", "one time column 'time_s'"),
        ("time_s,volts,drive.volts", "only one column for each of volts, speed"),
        ("", "one time column 'time_s'"),
        ("0,1,2", "one time column 'time_s'"),
    ],
)
def test_header_that_matches_nothing_names_itself_and_what_was_expected(
    tmp_path: Path, header: str, words: str
) -> None:
    with pytest.raises(DataError) as caught:
        feed(tmp_path, f"{header}\n0,1\n")
    assert f"drive.csv:1: the header '{header}'" in str(caught.value)
    assert words in str(caught.value)


def test_file_that_cannot_be_read_is_told(tmp_path: Path) -> None:
    more: Any = {"signals": SIGNALS, "layout": CsvLayout(), "restart_after_s": 1.0}
    with pytest.raises(MissingInput, match="nowhere.csv: no such file"):
        RecordedFeed("drive", tmp_path / "nowhere.csv", **more)
    with pytest.raises(InputOutputError, match="cannot be read"):
        RecordedFeed("drive", tmp_path, **more)


@pytest.mark.parametrize(
    "layout", [{"separator": ""}, {"separator": ";;"}, {"separator": "\n"}, {"decimal": ";"}, {"decimal": ","},
               {"time_format": "%Q"}, {"time_format": "%d %"}])
def test_layout_that_contradicts_itself_is_a_usage_error(layout: dict[str, str]) -> None:
    with pytest.raises(UsageError):
        CsvLayout(**layout)


@given(st.binary(max_size=300))
def test_any_bytes_give_rows_or_rejections(tmp_path_factory: pytest.TempPathFactory, content: bytes) -> None:
    recorded = feed(tmp_path_factory.getbasetemp(), b"time_s,volts\n" + content)
    got = list(recorded)
    assert len(got) + sum(recorded.counts.rejected.values()) <= recorded.counts.messages
    assert all(later.time >= earlier.time or earlier.time - later.time > 10.0
               for earlier, later in zip(got, got[1:], strict=False))


def merged(*feeds: RecordedFeed) -> list[tuple[str, float]]:
    return [(reading.source, reading.time) for reading in merge(feeds)]


def rows(*stamps: float) -> str:
    return "time_s,volts\n" + "".join(f"{stamp},1\n" for stamp in stamps)


def test_feeds_are_merged_by_time_and_at_equal_times_in_their_order(tmp_path: Path) -> None:
    a = feed(tmp_path, rows(0, 2, 4), name="a")
    b = feed(tmp_path, rows(1, 2, 3, 5), name="b")
    assert merged(a, b) == [("a", 0), ("b", 1), ("a", 2), ("b", 2), ("b", 3), ("a", 4), ("b", 5)]
    assert merged(feed(tmp_path, rows(0, 1))) == [("drive", 0), ("drive", 1)]
    assert merged() == []


def test_merge_holds_no_more_than_a_row_or_two_of_each_file(tmp_path: Path) -> None:
    a, b = feed(tmp_path, rows(*range(1000)), name="a"), feed(tmp_path, rows(*range(1000)), name="b")
    readings = merge([a, b])
    next(readings)
    assert a.counts.messages + b.counts.messages <= 4


def test_feeds_of_one_device_stay_together_over_its_restart(tmp_path: Path) -> None:
    a = feed(tmp_path, rows(100, 101, 0, 1), name="a")
    b = feed(tmp_path, rows(100.5, 101.5, 0.5), name="b")
    assert [time for _, time in merged(a, b)] == [100, 100.5, 101, 101.5, 0, 0.5, 1]


def test_single_reading_far_away_keeps_its_place_in_the_file(tmp_path: Path) -> None:
    a = feed(tmp_path, rows(0, 1e9, 2, 4), name="a")
    b = feed(tmp_path, rows(1, 3, 5), name="b")
    assert [time for _, time in merged(a, b)] == [0, 1e9, 1, 2, 3, 4, 5]
