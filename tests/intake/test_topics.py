from __future__ import annotations

import pytest

from rtid.intake.topics import matches


@pytest.mark.parametrize(
    ("filter_", "topic", "expected"),
    [
        ("plant/hall", "plant/hall", True),
        ("plant/+", "plant/hall", True),
        ("plant/+", "plant/hall/ahu1", False),
        ("plant/#", "plant/hall/ahu1", True),
        ("plant/#", "plant", True),
        ("+/hall", "plant/hall", True),
        ("+", "/hall", False),
        ("/+", "/hall", True),
        ("#", "$SYS/uptime", False),
        ("$SYS/#", "$SYS/uptime", True),
        ("plant/hall", "plant/Hall", False),
    ],
)
def test_filters_of_mqtt_section_4_7(filter_: str, topic: str, expected: bool) -> None:
    assert matches(filter_, topic) is expected
