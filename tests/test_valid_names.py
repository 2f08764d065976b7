from __future__ import annotations

import pytest

from rtid.valid_names import one_of

MANY = tuple(f"signal{i}" for i in range(21))


@pytest.mark.parametrize(
    ("name", "valid", "said"),
    [
        ("voltz", ("volts", "speed"), "one of volts, speed (nearest valid name 'volts')"),
        ("3", ("1", "2"), "one of 1, 2"),
        ("signal7x", MANY, "one of 21 names (nearest valid name 'signal7')"),
        ("zz", MANY, "one of 21 names"),
        ("drive" + 10_000 * "x", ("drive",), "one of drive"),
    ],
)
def test_the_names_and_the_nearest_as_far_as_it_helps(name: str, valid: tuple[str, ...], said: str) -> None:
    assert one_of(name, valid) == said
