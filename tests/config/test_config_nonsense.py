"""Nonsense never raises anything but a ConfigError of one line that begins with file and line."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtid.errors import ConfigError
from tests.support.config_texts import BASE, load_text

YAML_PIECES = st.sampled_from(
    [
        *"[]{}:,-?!&*#|>'\"%@\t\n ~",
        "- ",
        ": ",
        "? ",
        "--- ",
        "...\n",
        "!!int ",
        "&a ",
        "*a",
        "<<: ",
        "\\U",
        "%YAML 9.9\n",
    ]
)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("nonsense")


def refusal(text: str | bytes, folder: Path) -> str | None:
    """What loading says against it."""
    try:
        load_text(text, folder)
    except ConfigError as error:
        return str(error)
    return None


def survive(text: str | bytes, folder: Path) -> None:
    """A refusal, if there is one, is one line that begins with file and line."""
    said = refusal(text, folder)
    place = re.escape(str(folder / "c.yaml"))
    assert said is None or re.fullmatch(place + r":[1-9][0-9]*: [^\n\r]+", said)


@settings(max_examples=150, deadline=None, derandomize=True)
@given(data=st.binary(max_size=200))
def test_any_bytes(data: bytes, folder: Path) -> None:
    survive(data, folder)


@settings(max_examples=300, deadline=None, derandomize=True)
@given(pieces=st.lists(YAML_PIECES | st.text(max_size=3), max_size=30))
def test_any_yaml_like_text(pieces: list[str], folder: Path) -> None:
    survive("".join(pieces).encode("utf-8", errors="ignore"), folder)


@settings(max_examples=400, deadline=None, derandomize=True)
@given(start=st.integers(0, len(BASE)), length=st.integers(0, 12), pieces=st.lists(YAML_PIECES | st.text(max_size=3)))
def test_a_good_file_with_a_piece_replaced(start: int, length: int, pieces: list[str], folder: Path) -> None:
    text = BASE[:start] + "".join(pieces) + BASE[start + length :]
    survive(text.encode("utf-8", errors="ignore"), folder)


@settings(max_examples=300, deadline=None, derandomize=True)
@given(
    line=st.integers(0, BASE.count("\n") - 1),
    value=st.sampled_from(["", "[]", "{}", "7", "yes", "x", ".nan", "[[{}]]"]),
)
def test_a_good_file_with_another_value(line: int, value: str, folder: Path) -> None:
    lines = BASE.splitlines()
    lines[line] = lines[line].partition(":")[0] + ": " + value
    survive("\n".join(lines), folder)


@pytest.mark.parametrize(
    "text",
    [
        "%YAML 1." + "9" * 5000 + "\n---\n",
        "a: " + "9" * 5000,
        "a: 1" + ":59" * 2000,
        "? " * 2000,
        "- " * 2000,
        "{" * 5000,
    ],
    ids=["version", "digits", "sixties", "keys", "lists", "mappings"],
)
def test_what_exhausts_a_parser(text: str, folder: Path) -> None:
    with pytest.raises(ConfigError):
        load_text(text, folder)
