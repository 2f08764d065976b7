"""The invented conveyor ages by the physics of its motor."""

from __future__ import annotations

import pytest

from rtid.plants.conveyor import Ageing, Conveyor
from rtid.plants.motor import Motor


def test_the_conveyor_ages_as_physics_says() -> None:
    conveyor = Conveyor(seed=1, ageing=Ageing(start_s=1.0, length_s=1.0))
    gains = []
    for _ in range(301):
        conveyor.row()
        gains.append(conveyor.motor.gain)
    assert gains[100] == gains[0] == Motor().gain
    assert gains[100] > gains[150] > gains[200] == gains[300]
    assert gains[300] / gains[0] == pytest.approx(0.79, abs=0.02)


def test_the_same_seed_gives_the_same_conveyor() -> None:
    first, second, other = (Conveyor(seed=seed) for seed in (5, 5, 6))
    rows = [[conveyor.row() for _ in range(200)] for conveyor in (first, second, other)]
    assert rows[0] == rows[1] != rows[2]
