"""Every ready example loads, and does what its remarks say."""

from __future__ import annotations

from pathlib import Path

import pytest
import yaml
from jsonschema import Draft202012Validator

from rtid import config, schemas
from rtid.settings import Node

FOLDER = Path(__file__).parents[2] / "config"
EXAMPLES = sorted(FOLDER.iterdir())


def example(name: str) -> Node:
    return config.load(FOLDER / f"{name}.yaml", environ={})


def test_there_are_three_and_nothing_else() -> None:
    names = [path.name for path in EXAMPLES]
    assert names == ["conveyor-serial.yaml", "drying-oven-mqtt.yaml", "heat-exchanger-mqtt.yaml"]


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_an_example_loads_without_a_remark(path: Path) -> None:
    assert config.load(path, environ={}).notes == ()


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_an_example_agrees_with_the_schema(path: Path) -> None:
    Draft202012Validator(schemas.load("configuration")).validate(yaml.safe_load(path.read_text()))


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_an_example_says_that_rtid_only_listens(path: Path) -> None:
    assert "rtid only listens" in path.read_text()


def test_the_smallest_is_short() -> None:
    text = (FOLDER / "conveyor-serial.yaml").read_text()
    assert sum(not line.startswith("#") for line in text.splitlines()) <= 15


def test_the_full_one_shows_every_key_of_a_loop_that_this_version_acts_on() -> None:
    loop = yaml.safe_load((FOLDER / "heat-exchanger-mqtt.yaml").read_text())["loops"]
    shown = set(loop["outlet"]) | set(loop["pump"])
    assert shown == set(schemas.load("configuration")["$defs"]["loop"]["properties"]) - {"operating_point"}


def test_the_full_one_counts_arrival_times_and_the_small_one_the_drives() -> None:
    assert not example("heat-exchanger-mqtt").sources["exchanger"].has_payload_time
    assert example("conveyor-serial").sources["drive"].has_payload_time
