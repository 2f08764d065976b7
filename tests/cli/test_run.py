"""`rtid run` refuses in one line what it cannot serve. How it serves stands in tests/service."""

from __future__ import annotations

from pathlib import Path

from tests.support.plant_lines import configure
from tests.support.process import rtid


def test_a_state_directory_that_cannot_be_made_is_73(tmp_path: Path) -> None:
    path = configure(tmp_path)
    (tmp_path / "state").write_text("a file in its place")
    ended = rtid("run", path)
    assert ended.returncode == 73
    assert ended.stderr.startswith(f"rtid: {tmp_path}/state: ")
    assert ended.stderr.count("\n") == 1


def test_a_missing_configuration_is_66(tmp_path: Path) -> None:
    ended = rtid("run", tmp_path / "none.yaml")
    assert ended.returncode == 66
    assert ended.stderr.count("\n") == 1


def test_a_password_file_that_is_missing_is_said_before_anything_runs(tmp_path: Path) -> None:
    path = configure(tmp_path, broker=1)
    secret = tmp_path / "secret"
    path.write_text(path.read_text().replace("port: 1}", f"port: 1, username: me, password_file: {secret}}}"))
    ended = rtid("run", path)
    assert ended.returncode == 66
    assert f"{secret}: no such file" in ended.stderr
