"""The state directory is made, and belongs to one service at a time."""

from __future__ import annotations

from pathlib import Path

import pytest

from rtid.errors import CannotCreate, Unavailable
from rtid.service.state_dir import held, make_folder


def test_it_is_made_with_its_parents(tmp_path: Path) -> None:
    with held(tmp_path / "a" / "b") as folder:
        assert folder.is_dir()


def test_a_second_service_is_refused_and_a_later_one_is_not(tmp_path: Path) -> None:
    with held(tmp_path), pytest.raises(Unavailable, match="another rtid service holds"), held(tmp_path):
        pass
    with held(tmp_path) as folder:
        assert folder == tmp_path


def test_a_file_in_its_place_is_said_in_one_line(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(CannotCreate) as caught:
        make_folder(tmp_path / "file" / "state")
    assert str(tmp_path / "file") in str(caught.value)
    assert "\n" not in str(caught.value)
