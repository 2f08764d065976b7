"""Every mistake is refused in one line that names file, line, key, what is wrong and what was expected."""

from __future__ import annotations

from pathlib import Path

import pytest

from rtid import config
from rtid.errors import ConfigError, InputOutputError, MissingInput
from tests.support.config_mistakes import MISTAKES, Mistake
from tests.support.config_texts import load_text


@pytest.mark.parametrize("mistake", MISTAKES, ids=lambda mistake: mistake.new[:40])
def test_a_mistake_is_refused_with_its_place(mistake: Mistake, tmp_path: Path) -> None:
    with pytest.raises(ConfigError) as caught:
        load_text(mistake.text, tmp_path)
    message = str(caught.value)
    place = f"{tmp_path / 'c.yaml'}:"
    assert message.startswith(place)
    assert message.count("\n") == 0
    assert mistake.says in message
    if mistake.says[0].isdigit():
        assert message.startswith(place + mistake.says)


@pytest.mark.parametrize("text", ["", "# only a remark\n", "\n\n", "---\n", "~\n"])
def test_an_empty_file_is_refused(text: str, tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"c\.yaml:1: .*expected"):
        load_text(text, tmp_path)


def test_a_list_in_place_of_the_whole_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"c\.yaml:1: found a list; expected a mapping: the keys node"):
        load_text("- node\n- sources\n", tmp_path)


def test_bytes_that_are_not_utf8_are_refused_with_their_line(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"c\.yaml:3: a byte that is not UTF-8; save the file as UTF-8"):
        load_text(b"node: n1\n\n# 20 \xb0C\n", tmp_path)


def test_a_file_beyond_a_mebibyte_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"c\.yaml:1: the file is larger than 1 MiB"):
        load_text("#" * (1 << 20) + "\n", tmp_path)


def test_aliases_that_multiply_are_refused(tmp_path: Path) -> None:
    bomb = "a0: &a0 [1, 1, 1, 1, 1, 1, 1, 1, 1, 1]\n"
    bomb += "".join(f"a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 10)}]\n" for i in range(1, 9))
    with pytest.raises(ConfigError, match=r"c\.yaml:5: a4\[\d\]: more than 20000 values, aliases written out"):
        load_text(bomb, tmp_path)


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(MissingInput, match=r"none\.yaml: no such file; give the path"):
        config.load(tmp_path / "none.yaml")
    with pytest.raises(MissingInput, match="this is a folder; give the path"):
        config.load(tmp_path)


def test_a_file_below_a_file_cannot_be_read(tmp_path: Path) -> None:
    (tmp_path / "plain").write_text("")
    with pytest.raises(InputOutputError, match="plain/c.yaml: cannot be read"):
        config.load(tmp_path / "plain" / "c.yaml")
