"""A sealed document is taken only when every bit of it is as it was written."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rtid.service import sealed
from rtid.service.sealed import Kind, NotUsable, seal, unseal
from tests.support.remembering import Killed, feed, killed_at, node_in, readings, start

KIND = Kind("rtid/test", 1)


@pytest.fixture(scope="module")
def state(tmp_path_factory: pytest.TempPathFactory) -> bytes:
    """The state file of a loop that is learning."""
    folder = tmp_path_factory.mktemp("state")
    parts = start(folder / "state", node_in(folder))
    feed(parts, readings(250))
    parts.finish()
    return (folder / "state" / "loops" / "belt.json").read_bytes()


def rejected(content: bytes) -> bool:
    try:
        unseal(content, Kind("rtid/state", 1))
    except NotUsable:
        return True
    return False


def test_what_goes_in_comes_out() -> None:
    body = {"array": np.array([1.0, np.nan, -0.0]), 3: ("a", None), "text": "ä\"sha256\":\"", "number": 0.1 + 0.2}
    again = unseal(seal(body, KIND), KIND)
    assert np.array_equal(again.pop("array"), body.pop("array"), equal_nan=True)
    assert again == body


def test_a_state_file_cut_at_any_length_is_refused(state: bytes) -> None:
    assert not rejected(state)
    assert [n for n in range(len(state)) if not rejected(state[:n])] == []


def test_a_state_file_with_any_of_500_bits_flipped_is_refused(state: bytes) -> None:
    chance = random.Random(1)
    for bit in [*range(8 * 200), *(chance.randrange(8 * len(state)) for _ in range(500))]:
        damaged = bytearray(state)
        damaged[bit // 8] ^= 1 << bit % 8
        assert rejected(bytes(damaged)), f"bit {bit}"


def test_more_behind_the_end_is_refused(state: bytes) -> None:
    assert rejected(state + b" ")
    assert rejected(state + state)


@pytest.mark.parametrize("content", [b"", b"{}", b"\x00" * 4096, b"[" * 100_000, b'{"schema":"rtid/state/1"}'])
def test_what_is_no_document_is_refused(content: bytes) -> None:
    assert rejected(content)


def test_an_old_schema_is_brought_up_step_by_step() -> None:
    old = seal({"speed_rpm": 60.0}, Kind("rtid/test", 0))

    def to_1(body: Any) -> Any:
        return {"speed_hz": body["speed_rpm"] / 60.0}

    def to_2(body: Any) -> Any:
        return body | {"direction": "forward"}

    assert unseal(old, Kind("rtid/test", 2, {0: to_1, 1: to_2})) == {"speed_hz": 1.0, "direction": "forward"}


@pytest.mark.parametrize(
    ("written", "read", "words"),
    [
        (Kind("rtid/test", 2), Kind("rtid/test", 1), "a newer rtid wrote it"),
        (Kind("rtid/test", 0), Kind("rtid/test", 1), "cannot be read"),
        (Kind("rtid/test", 0), Kind("rtid/test", 1, {0: lambda body: body["gone"]}), "cannot be read"),
        (Kind("rtid/other", 1), Kind("rtid/test", 1), "is no rtid/test document"),
    ],
)
def test_a_document_of_another_kind_or_number_is_refused_with_the_reason(written: Kind, read: Kind, words: str) -> None:
    with pytest.raises(NotUsable, match=words):
        unseal(seal({"a": 1}, written), read)


def test_killed_at_any_step_of_a_write_the_old_or_the_new_file_is_there_whole(tmp_path: Path) -> None:
    path, kept = tmp_path / "belt.json", tmp_path / "belt.previous.json"
    seen = set()
    for step in range(1, 20):
        sealed.write(path, seal("old", KIND), keep=kept)
        try:
            with killed_at(step):
                sealed.write(path, seal("new", KIND), keep=kept)
        except Killed:
            newest = path if path.exists() else kept
            seen.add(unseal(newest.read_bytes(), KIND))
        else:
            break
    assert seen == {"old", "new"}
    assert unseal(path.read_bytes(), KIND) == "new"
    assert unseal(kept.read_bytes(), KIND) == "old"
