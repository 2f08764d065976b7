from __future__ import annotations

import pytest

from rtid.topics import has_wildcard, is_filter, matches


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


@pytest.mark.parametrize("text", ["plant/hall", "+", "#", "plant/+/temp", "+/+", "plant/#", "/", "$SYS/#"])
def test_a_well_formed_filter(text: str) -> None:
    assert is_filter(text)


@pytest.mark.parametrize("text", ["plant#", "plant/#/temp", "plant/a+", "#/", "++", "plant/##"])
def test_a_wildcard_in_the_wrong_place(text: str) -> None:
    assert not is_filter(text)


@pytest.mark.parametrize(("text", "expected"), [("plant/hall", False), ("plant/+", True), ("#", True)])
def test_only_a_wildcard_stands_for_several_topics(text: str, expected: bool) -> None:
    assert has_wildcard(text) is expected
