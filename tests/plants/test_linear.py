"""The linear plant agrees with scipy's simulation of the same system."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.signal import lsim

from rtid.plants.linear import LinearPlant, first_order, random_steps, second_order, simulate, two_lags

PERIOD_S = 0.1


def scipy_output(plant: LinearPlant, inputs: np.ndarray, fine: int) -> np.ndarray:
    """The same plant by scipy on a grid `fine` times as dense, on which the dead time is whole."""
    late = round(plant.dead_time_s / PERIOD_S * fine)
    dense = np.repeat(inputs, fine) - inputs[0]
    dense = np.concatenate([np.zeros(late), dense])[: len(dense)]
    denominator = [*reversed(plant.lags), 1.0]
    _, response, _ = lsim(([plant.gain], denominator), dense, np.arange(len(dense)) * PERIOD_S / fine, interp=False)
    return plant.offset + plant.gain * inputs[0] + response[::fine]


@pytest.mark.parametrize(
    "plant",
    [
        first_order(2.0, 1.0),
        first_order(-2.0, 1.0, dead_time_s=0.3, offset=5.0),
        first_order(2.0, 0.5, dead_time_s=0.14),
        second_order(3.0, 4.0, 0.3, dead_time_s=0.06),
        second_order(1.0, 2.0, 1.0),
        two_lags(0.5, 2.0, 0.2, dead_time_s=0.02, offset=-1.0),
    ],
)
def test_simulation_agrees_with_scipy(plant: LinearPlant) -> None:
    inputs = random_steps(200, low=-1.0, high=3.0, hold=(3, 12), seed=4)
    ours = simulate(plant, inputs, period_s=PERIOD_S)
    assert np.allclose(ours, scipy_output(plant, inputs, 5), rtol=0.0, atol=1e-9)


def test_two_lags_are_a_second_order_plant() -> None:
    lags = two_lags(1.0, 2.0, 0.5).lags
    assert second_order(1.0, 1.0, 1.25).lags == pytest.approx(lags, rel=1e-12)


def test_the_output_responds_at_the_next_row_without_dead_time() -> None:
    inputs = np.array([0.0, 0.0, 1.0, 1.0, 1.0])
    output = simulate(first_order(1.0, 1.0), inputs, period_s=1.0)
    assert output[:3].tolist() == [0.0, 0.0, 0.0]
    assert output[3] == pytest.approx(1.0 - np.exp(-1.0), rel=1e-12)


def test_a_change_rules_from_its_row_on() -> None:
    inputs = np.ones(400)
    output = simulate(first_order(1.0, 0.5), inputs, period_s=PERIOD_S, changes={100: first_order(2.0, 0.5)})
    assert np.allclose(output[:101], 1.0)
    assert output[101] == pytest.approx(2.0 - np.exp(-0.2), rel=1e-9)
    assert output[-1] == pytest.approx(2.0, rel=1e-9)


def test_noise_has_its_deviation_and_its_seed() -> None:
    plant = first_order(1.0, 0.5, noise=0.3)
    first, second, other = (simulate(plant, np.zeros(4000), period_s=PERIOD_S, seed=seed) for seed in (1, 1, 2))
    assert np.array_equal(first, second)
    assert not np.array_equal(first, other)
    assert float(np.std(first)) == pytest.approx(0.3, abs=4.0 * 0.3 / np.sqrt(2.0 * 4000))


def test_random_steps_hold_within_their_bounds() -> None:
    signal = random_steps(500, low=2.0, high=3.0, hold=(4, 9), seed=7)
    assert signal.shape == (500,)
    assert signal.min() >= 2.0
    assert signal.max() <= 3.0
    runs = np.diff(np.flatnonzero(np.diff(signal)))
    assert runs.min() >= 4
    assert runs.max() <= 9
