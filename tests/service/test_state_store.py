"""The files of one loop: the newest that verifies is used, the others are set aside and said."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import pytest

from rtid.actions import ActionRefused
from rtid.errors import InputOutputError
from rtid.service.sealed import Kind
from rtid.service.state_store import MOST_ASIDE, StateStore


def content(body: dict[str, Any]) -> int:
    number: int = body["number"]
    return number


def saved(folder: Path, *numbers: int) -> StateStore:
    store = StateStore(folder, "belt")
    for number in numbers:
        store.save({"number": number})
    return store


def aside(folder: Path, why: str) -> list[Path]:
    return sorted(folder.glob(f"belt.*.{why}.json"))


def test_the_newest_is_used_and_the_one_before_is_kept(tmp_path: Path) -> None:
    store = saved(tmp_path, 1, 2, 3)
    assert store.restore(content) == 3
    store.present.unlink()
    assert store.restore(content) == 2


def test_without_files_there_is_nothing_and_nothing_is_said(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    assert StateStore(tmp_path / "loops", "belt").restore(content) is None
    assert caplog.text == ""


@pytest.mark.parametrize("damage", ["cut", "flip", "nothing", "garbage"])
def test_a_damaged_file_is_set_aside_with_a_message_and_the_older_one_used(
    tmp_path: Path, caplog: pytest.LogCaptureFixture, damage: str
) -> None:
    store = saved(tmp_path, 1, 2)
    good = store.present.read_bytes()
    bad = {"cut": good[:-1], "flip": good.replace(b"2", b"3", 1), "nothing": b"", "garbage": b"\xff\x00"}[damage]
    store.present.write_bytes(bad)
    assert store.restore(content) == 1
    (kept,) = aside(tmp_path, "bad")
    assert kept.read_bytes() == bad
    assert kept.name in caplog.text
    assert not store.present.exists()
    store.save({"number": 4})
    assert (store.restore(content), content_of_previous(store)) == (4, 1)


def content_of_previous(store: StateStore) -> int | None:
    store.present.unlink()
    return store.restore(content)


def test_bit_flips_and_cuts_in_both_files_never_crash_and_are_never_taken(tmp_path: Path) -> None:
    chance = random.Random(2)
    for _ in range(150):
        store = saved(tmp_path, 1, 2)
        for path in (store.present, store.previous):
            damaged = bytearray(path.read_bytes())
            if chance.random() < 0.5:
                damaged[chance.randrange(len(damaged))] ^= 1 << chance.randrange(8)
            else:
                del damaged[chance.randrange(len(damaged)) :]
            path.write_bytes(damaged)
        assert store.restore(content) is None


def test_of_what_is_set_aside_the_newest_ones_stay(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    for number in range(MOST_ASIDE + 3):
        store = saved(tmp_path, number)
        store.present.write_bytes(b"damaged %d" % number)
        assert store.restore(content) is None
    kept = [path.read_bytes() for path in aside(tmp_path, "bad")]
    assert kept == [b"damaged %d" % number for number in range(3, MOST_ASIDE + 3)]
    assert caplog.text.count("removed") == 3


def test_what_the_maker_cannot_use_is_set_aside_too(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    store = saved(tmp_path, 1)
    store.save({"other": 2})
    assert store.restore(content) == 1
    assert "does not fit this rtid (KeyError: 'number')" in caplog.text
    assert len(aside(tmp_path, "bad")) == 1


def test_the_state_of_another_plant_is_kept_as_a_copy(tmp_path: Path) -> None:
    def refuse(body: dict[str, Any]) -> int:
        raise ActionRefused("another plant")

    store = saved(tmp_path, 1, 2)
    before = store.present.read_bytes()
    with pytest.raises(ActionRefused):
        store.restore(refuse)
    assert [path.read_bytes() for path in aside(tmp_path, "old")] == [before]
    assert store.restore(content) == 2


def test_a_state_of_an_older_schema_is_brought_up(tmp_path: Path) -> None:
    StateStore(tmp_path, "belt", kind=Kind("rtid/state", 0)).save({"count": 7})
    newer = Kind("rtid/state", 1, {0: lambda body: {"number": body["count"]}})
    assert StateStore(tmp_path, "belt", kind=newer).restore(content) == 7


def test_a_disk_that_refuses_is_one_line_and_leaves_what_was_there(tmp_path: Path) -> None:
    store = saved(tmp_path, 1)
    store.present.with_name("belt.json.new").mkdir()  # the temporary file cannot be written
    with pytest.raises(InputOutputError, match=r"belt\.json: cannot be written \([^\n]*\); [^\n]+$"):
        store.save({"number": 2})
    assert store.restore(content) == 1
