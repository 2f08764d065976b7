"""The configuration's JSON Schema: valid itself, and refusing what a schema can see."""

from __future__ import annotations

import copy
from typing import Any

import pytest
import yaml
from jsonschema import Draft202012Validator

from rtid import schemas
from tests.support.config_mistakes import BROKER, LOOPS, SIGNALS, SOURCES, WHOLE, Mistake
from tests.support.config_texts import BASE

MISTAKES = [*WHOLE, *BROKER, *SOURCES, *SIGNALS, *LOOPS]
PHYSICAL = {
    "structure": "physical",
    "filter_s": 0.02,
    "balance": {"equals": "drive.volts", "terms": {"friction": "drive.speed", "inertia": {"rate_of": "drive.speed"}}},
}


@pytest.fixture(scope="module")
def validator() -> Draft202012Validator:
    return Draft202012Validator(schemas.load("configuration"))


def with_loop(**keys: Any) -> dict[str, Any]:
    """The base, its loop changed."""
    document: dict[str, Any] = copy.deepcopy(yaml.safe_load(BASE))
    document["loops"]["belt"].update(keys)
    return document


@pytest.mark.parametrize("name", schemas.names())
def test_a_schema_is_one_of_2020_12(name: str) -> None:
    schema = schemas.load(name)
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    Draft202012Validator.check_schema(schema)


def test_an_unknown_schema_is_refused_with_the_names() -> None:
    with pytest.raises(KeyError, match="no schema wrong; expected one of configuration, "):
        schemas.load("wrong")


def test_the_base_is_accepted(validator: Draft202012Validator) -> None:
    validator.validate(yaml.safe_load(BASE))


@pytest.mark.parametrize("mistake", MISTAKES, ids=lambda mistake: mistake.new[:40])
def test_a_mistake_is_seen(mistake: Mistake, validator: Draft202012Validator) -> None:
    assert validator.is_valid(yaml.safe_load(mistake.text)) is not mistake.seen


def test_most_mistakes_are_seen() -> None:
    assert sum(mistake.seen for mistake in MISTAKES) > 0.7 * len(MISTAKES)


@pytest.mark.parametrize(
    "keys",
    [
        {"inputs": ["drive.volts", "hall.temp"]},
        {"model": {"integrating": True, "order": 0}},
        {"operating_point": {"signal": "drive.speed", "edges": [100, 250], "hysteresis": 10}},
        {"operating_point": {"signal": "drive.speed", "values": ["A", "B"]}},
        {"baseline": {"known": {"gain": 2.0, "time_constants_s": [0.5, 0.05], "dead_time_s": 0.02}}},
    ],
    ids=lambda keys: next(iter(keys)),
)
def test_what_a_later_version_takes_is_accepted(keys: dict[str, Any], validator: Draft202012Validator) -> None:
    validator.validate(with_loop(**keys))


def test_a_physical_loop_has_a_balance_and_neither_inputs_nor_output(validator: Draft202012Validator) -> None:
    document = with_loop(model=PHYSICAL)
    assert not validator.is_valid(document)
    del document["loops"]["belt"]["inputs"], document["loops"]["belt"]["output"]
    validator.validate(document)


def test_a_balance_belongs_to_a_physical_loop(validator: Draft202012Validator) -> None:
    assert not validator.is_valid(with_loop(model={**PHYSICAL, "structure": "output_error"}))
