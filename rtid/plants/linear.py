"""A linear plant of first or second order with dead time, for tests, recorded streams and planning."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from rtid.plants.discrete import Array, Step, delayed


@dataclass(frozen=True, slots=True)
class LinearPlant:
    """y = offset + gain·e^(-dead_time·s) / (1 + lags[0]·s + lags[1]·s²) u + white noise of deviation `noise`."""

    gain: float
    lags: tuple[float, ...]
    dead_time_s: float = 0.0
    offset: float = 0.0
    noise: float = 0.0

    def step(self, period_s: float) -> Step:
        """The exact map of one period on the state (response, its rate)."""
        n = len(self.lags)
        a = np.eye(n, k=1)
        a[-1] = [-value / self.lags[-1] for value in (1.0, *self.lags[:-1])]
        b = np.zeros((n, 1))
        b[-1, 0] = self.gain / self.lags[-1]
        return delayed(a, b, period_s=period_s, dead_time_s=self.dead_time_s)


def first_order(
    gain: float, time_constant_s: float, *, dead_time_s: float = 0.0, offset: float = 0.0, noise: float = 0.0
) -> LinearPlant:
    return LinearPlant(gain, (time_constant_s,), dead_time_s, offset, noise)


def second_order(
    gain: float,
    natural_frequency: float,
    damping_ratio: float,
    *,
    dead_time_s: float = 0.0,
    offset: float = 0.0,
    noise: float = 0.0,
) -> LinearPlant:
    """`natural_frequency` in rad/s, undamped."""
    lags = (2.0 * damping_ratio / natural_frequency, 1.0 / natural_frequency**2)
    return LinearPlant(gain, lags, dead_time_s, offset, noise)


def two_lags(
    gain: float, slow_s: float, fast_s: float, *, dead_time_s: float = 0.0, offset: float = 0.0, noise: float = 0.0
) -> LinearPlant:
    return LinearPlant(gain, (slow_s + fast_s, slow_s * fast_s), dead_time_s, offset, noise)


def simulate(
    plant: LinearPlant,
    inputs: Array,
    *,
    period_s: float,
    seed: int = 0,
    changes: Mapping[int, LinearPlant] | None = None,
) -> Array:
    """Measured output, one value per row of `inputs` (rows,).

    Row k holds the output at its tick and the input applied from then on. Before the first row the plant rests at the
    first input. `changes` maps a row to the plant that rules from it on; all plants have the same order.
    """
    wanted = dict(changes or {})
    rng = np.random.default_rng(seed)
    rest = float(inputs[0])
    state = np.zeros(len(plant.lags))
    state[0] = plant.gain * rest
    step = plant.step(period_s)
    output = np.empty(len(inputs))
    for k in range(len(inputs)):
        if k in wanted:
            plant = wanted[k]
            step = plant.step(period_s)
        output[k] = plant.offset + state[0] + plant.noise * rng.standard_normal()
        now, before = (float(inputs[i]) if i >= 0 else rest for i in (k - step.delay, k - step.delay - 1))
        state = step.ad @ state + step.earlier[:, 0] * before + step.later[:, 0] * now
    return output


def random_steps(rows: int, *, low: float, high: float, hold: tuple[int, int], seed: int = 0) -> Array:
    """A signal (rows,) that jumps to a random level in [low, high] and stays for a random number of rows in `hold`."""
    rng = np.random.default_rng(seed)
    shortest, longest = hold
    count = math.ceil(rows / shortest)
    lengths = rng.integers(shortest, longest + 1, size=count)
    return np.repeat(rng.uniform(low, high, size=count), lengths)[:rows]
