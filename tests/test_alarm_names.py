"""The schemas know the alarms that there are: `settings.DEFAULT_ALARMS` is the one list."""

from __future__ import annotations

import pytest

from rtid import schemas
from rtid.settings import DEFAULT_ALARMS
from tests.support.schema_parts import parts


@pytest.mark.parametrize("name", ["configuration", "event", "health", "snapshot", "status_reply", "summary"])
def test_a_schema_lists_the_alarms_there_are(name: str) -> None:
    found = [part["enum"] for part in parts(schemas.load(name)) if "plant_shift" in part.get("enum", ())]
    assert found
    assert all(names == list(DEFAULT_ALARMS) for names in found)
