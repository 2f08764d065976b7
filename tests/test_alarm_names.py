"""The schemas know the alarms that there are: `settings.DEFAULT_ALARMS` is the one list."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest

from rtid import schemas
from rtid.settings import DEFAULT_ALARMS


def lists_of_alarms(schema: Any) -> Iterator[list[str]]:
    """Every enumeration that holds an alarm, at any depth."""
    if isinstance(schema, dict):
        if "plant_shift" in schema.get("enum", ()):
            yield schema["enum"]
        for below in schema.values():
            yield from lists_of_alarms(below)
    elif isinstance(schema, list):
        for below in schema:
            yield from lists_of_alarms(below)


@pytest.mark.parametrize("name", ["configuration", "event", "health", "snapshot", "summary"])
def test_a_schema_lists_the_alarms_there_are(name: str) -> None:
    found = list(lists_of_alarms(schemas.load(name)))
    assert found
    assert all(names == list(DEFAULT_ALARMS) for names in found)
