"""`rtid replay` runs the pipeline over files and leaves what the contract names."""

from __future__ import annotations

import csv
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from rtid import schemas
from rtid.cli.main import main
from rtid.plants.linear import random_steps, simulate
from tests.support.plant_lines import PERIOD_S, PLANT, configure
from tests.support.process import rtid

ROWS = 3000


@pytest.fixture(scope="module")
def table() -> list[tuple[float, float, float]]:
    volts = random_steps(ROWS, low=2.0, high=12.0, hold=(20, 120), seed=3)
    speed = simulate(PLANT, volts, period_s=PERIOD_S, seed=3)
    return [(round(PERIOD_S * k, 2), round(float(volts[k]), 2), round(float(speed[k]), 2)) for k in range(ROWS)]


def write(path: Path, table: list[tuple[float, float, float]], *, header: str = "time_s,volts,speed") -> Path:
    path.write_text(header + "\n" + "".join(",".join(map(str, row)) + "\n" for row in table))
    return path


def replay(folder: Path, recorded: Path, *options: str) -> int:
    out = folder / "out"
    return main(["replay", str(configure(folder)), "--feed", f"drive={recorded}", "--out", str(out), *options])


def read(path: Path) -> dict[str, Any]:
    document: dict[str, Any] = json.loads(path.read_text())
    return document


@dataclass(frozen=True)
class Done:
    """A replay of the whole table that has ended well."""

    folder: Path
    said: str

    @property
    def out(self) -> Path:
        return self.folder / "out"


@pytest.fixture(scope="module")
def done(table: list[tuple[float, float, float]], tmp_path_factory: pytest.TempPathFactory) -> Done:
    folder = tmp_path_factory.mktemp("replay")
    recorded = write(folder / "drive.csv", table)
    ended = rtid("replay", configure(folder), "--feed", f"drive={recorded}", "--out", folder / "out")
    assert (ended.returncode, ended.stderr) == (0, "")
    return Done(folder, ended.stdout)


def test_it_leaves_a_snapshot_a_trend_events_and_a_summary(done: Done) -> None:
    names = {"belt.snapshot.json", "belt.trend.csv", "events.jsonl", "summary.json"}
    assert {path.name for path in done.out.iterdir()} == names
    snapshot, summary = read(done.out / "belt.snapshot.json"), read(done.out / "summary.json")
    jsonschema.validate(snapshot, schemas.load("snapshot"))
    jsonschema.validate(summary, schemas.load("summary"))
    assert snapshot["time"] == "1970-01-01T00:00:29.990Z"
    assert snapshot["quantities"]["gain"]["value"] == pytest.approx(PLANT.gain, rel=0.03)
    assert summary["samples"] == ROWS
    assert summary["loops"]["belt"]["state"] == snapshot["state"] == "watching"
    assert not (done.folder / "state").exists()


def test_it_ends_with_a_short_summary_in_plain_words(done: Done) -> None:
    first, second, *rest = done.said.splitlines()
    assert first.startswith(f"{ROWS} rows in ")
    assert second == "belt: watching, good"
    assert rest[0].split()[0] == "gain"
    assert rest[-1].startswith("  alarms: ")


def test_the_trend_has_a_row_per_second_and_its_columns_by_the_contract(done: Done) -> None:
    with (done.out / "belt.trend.csv").open() as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0])[:5] == ["time_s", "state", "health", "drift_ratio", "worst_quantity"]
    assert list(rows[0])[5:8] == ["gain", "gain_low", "gain_high"]
    assert list(rows[0])[-1] == "detectable_gain_pct"
    times = [float(row["time_s"]) for row in rows]
    assert all(1.0 <= after - before < 1.0 + 16 * PERIOD_S for before, after in zip(times, times[1:], strict=False))


def test_another_layout_gives_the_same_bytes_and_replaces_what_stood_there(
    tmp_path: Path, done: Done, table: list[tuple[float, float, float]]
) -> None:
    recorded = write(tmp_path / "drive.csv", table, header="Zeit,volts,drive.speed")
    recorded.write_text(recorded.read_text().replace(",", ";").replace(".", ",").replace("drive,speed", "drive.speed"))
    out = tmp_path / "out"
    out.mkdir()
    names = ("belt.snapshot.json", "belt.trend.csv", "events.jsonl")
    for name in names:
        (out / name).write_text("what an earlier run left\n")
    assert replay(tmp_path, recorded, "--separator", ";", "--decimal", ",", "--time-column", "Zeit") == 0
    assert [(out / name).read_bytes() for name in names] == [(done.out / name).read_bytes() for name in names]


def test_bad_rows_are_said_once_per_kind_and_the_good_ones_used(
    tmp_path: Path, table: list[tuple[float, float, float]], capsys: pytest.CaptureFixture[str]
) -> None:
    recorded = write(tmp_path / "drive.csv", table)
    lines = recorded.read_text().splitlines()
    lines[100] = "0.99,nonsense,1.0"
    lines[200] = "1.99,1"
    lines[300] = "2.99,nan,1.0"
    recorded.write_text("\n".join(lines) + "\n")
    assert replay(tmp_path, recorded, "--json") == 0
    said = capsys.readouterr()
    summary = json.loads(said.out)
    assert summary == read(tmp_path / "out" / "summary.json")
    assert sum(problem["count"] for problem in summary["rejected"].values()) == 3
    assert len(said.err.splitlines()) == len(summary["rejected"])
    assert "101" in said.err
    assert summary["loops"]["belt"]["state"] == "watching"


@pytest.mark.parametrize(
    ("feeds", "code", "words"),
    [
        (["--feed", "drove=@GOOD"], 64, "no source 'drove'; expected one of drive"),
        (["--feed", "drive"], 64, "write SOURCE=FILE.csv"),
        (["--feed", "drive=@GOOD", "--feed", "drive=@GOOD"], 64, "drive is fed twice"),
        (["--feed", "drive=none.csv"], 66, "none.csv: no such file"),
        (["--feed", "drive=@STRANGE"], 65, "strange.csv:1: the header"),
        ([], 64, "--feed"),
    ],
)
def test_wrong_feeds_are_refused_in_one_line(
    tmp_path: Path, table: list[tuple[float, float, float]], *, feeds: list[str], code: int, words: str
) -> None:
    recorded = write(tmp_path / "drive.csv", table)
    strange = write(tmp_path / "strange.csv", table, header="a,b,c")
    feeds = [text.replace("@GOOD", str(recorded)).replace("@STRANGE", str(strange)) for text in feeds]
    ended = rtid("replay", configure(tmp_path), *feeds, "--out", tmp_path / "out")
    assert ended.returncode == code
    assert words in ended.stderr
    assert ended.stderr.count("\n") == 1


def test_a_loop_without_data_is_refused(tmp_path: Path, table: list[tuple[float, float, float]]) -> None:
    path = configure(tmp_path)
    extra = "  load:\n    serial: {port: /dev/other}\n    decode: plain\n    signals: {torque: {}}\nloops:\n"
    text = path.read_text().replace("loops:\n", extra).replace("[drive.volts]", "[load.torque]")
    path.write_text(text.replace("    time: {column: 0, unit: ms}\n", ""))
    recorded = write(tmp_path / "drive.csv", table)
    ended = rtid("replay", path, "--feed", f"drive={recorded}", "--out", tmp_path / "out")
    assert ended.returncode == 65
    assert "loop belt has no data for source load; add --feed load=FILE.csv" in ended.stderr


def test_a_folder_that_cannot_be_made_is_73(tmp_path: Path, table: list[tuple[float, float, float]]) -> None:
    recorded = write(tmp_path / "drive.csv", table)
    ended = rtid("replay", configure(tmp_path), "--feed", f"drive={recorded}", "--out", recorded / "out")
    assert ended.returncode == 73
    assert ended.stderr.count("\n") == 1


def test_a_file_without_good_rows_leaves_a_waiting_loop(tmp_path: Path) -> None:
    assert replay(tmp_path, write(tmp_path / "drive.csv", [])) == 0
    assert read(tmp_path / "out" / "summary.json")["loops"]["belt"]["state"] == "waiting"
