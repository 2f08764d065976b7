"""The manual and the program cannot part: keys, commands, topics and alarms are compared with what the program has."""

from __future__ import annotations

import argparse
import importlib
import re
import textwrap
from pathlib import Path
from typing import Any

import pytest

from rtid import config, schemas
from rtid.cli.guide import TOPICS, page
from rtid.cli.main import COMMANDS, Parser, main
from tests.support.schema_parts import parts

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")


def keys(schema: Any) -> set[str]:
    """Every key that a JSON Schema names, at any depth."""
    return {key for part in parts(schema) for key in part.get("properties", {})}


def named(text: str) -> set[str]:
    """Every word that stands in code marks or in an indented example."""
    marked = re.findall(r"`([^`]+)`", text) + re.findall(r"^ {4}.*$", text, flags=re.MULTILINE)
    return {word for piece in marked for word in re.findall(r"\w+", piece)}


def options(command: str) -> set[str]:
    subparsers = Parser(prog="rtid").add_subparsers()
    importlib.import_module(f"rtid.cli.{command}").add(subparsers)
    actions: list[argparse.Action] = subparsers.choices[command]._actions
    return {flag for action in actions for flag in action.option_strings if flag.startswith("--")} - {"--help"}


def section(command: str) -> str:
    sections = page("commands").split("\n## ")
    return next(text for text in sections if text.startswith(f"rtid {command}"))


def test_the_list_names_every_topic_with_its_title(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["guide"]) == 0
    lines = capsys.readouterr().out.splitlines()[1:]
    assert [line.split()[0] for line in lines] == list(TOPICS)
    assert all(len(line.split()) > 3 for line in lines)


@pytest.mark.parametrize("topic", TOPICS)
def test_a_topic_is_printed_as_it_stands(topic: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["guide", topic]) == 0
    said = capsys.readouterr().out
    assert said == page(topic)
    assert said.startswith("# ")
    assert said.endswith("\n")


@pytest.mark.parametrize("topic", TOPICS)
def test_a_page_refers_only_to_pages_and_commands_that_exist(topic: str) -> None:
    text = page(topic)
    assert set(re.findall(r"rtid guide ([a-z]+)", text)) <= set(TOPICS)
    assert set(re.findall(r"(?:^ {4}|`)rtid ([a-z]+)", text, flags=re.MULTILINE)) <= set(COMMANDS)


def test_an_unknown_topic_gets_the_nearest_one(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["guide", "configurations"]) == 64
    said = capsys.readouterr().err
    assert "(nearest valid name 'configuration')" in said
    assert said.count("\n") == 1


def test_every_key_of_the_configuration_is_explained() -> None:
    known = keys(schemas.load("configuration"))
    assert {"node", "period_s", "memory_s", "password_file"} <= known
    assert known - named(page("configuration")) == set()


def test_every_alarm_is_explained() -> None:
    explained = re.findall(r"^\| `(\w+)`", page("drift"), flags=re.MULTILINE)
    assert sorted(explained) == sorted(schemas.load("event")["$defs"]["alarm"]["enum"])


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_and_option_is_explained(command: str) -> None:
    text = section(command)
    assert {option for option in options(command) if option not in text} == set()


@pytest.mark.parametrize("command", COMMANDS)
def test_no_option_is_explained_that_does_not_exist(command: str) -> None:
    assert set(re.findall(r"--[a-z][a-z-]*", section(command))) <= options(command)


@pytest.mark.parametrize("name", sorted(set(schemas.names()) - {"configuration", "summary"}))
def test_every_field_that_is_published_is_explained(name: str) -> None:
    published = keys(schemas.load(name))
    assert len(published) > 3
    assert published - named(page("operation" if name == "status_reply" else "topics")) == set()


def test_the_configuration_in_the_readme_is_right(tmp_path: Path) -> None:
    found = re.search(r"```yaml\n(.*?)```", README, flags=re.DOTALL)
    assert found is not None
    (tmp_path / "plant.yaml").write_text(found[1])
    node = config.load(tmp_path / "plant.yaml")
    assert list(node.loops) == ["conveyor"]
    assert not node.notes


def test_the_shortest_configuration_in_the_manual_is_right(tmp_path: Path) -> None:
    found = re.search(r"^    node: .*?(?=\n\n)", page("configuration"), flags=re.DOTALL | re.MULTILINE)
    assert found is not None
    (tmp_path / "plant.yaml").write_text(textwrap.dedent(found[0]))
    assert list(config.load(tmp_path / "plant.yaml").loops) == ["conveyor"]
