"""The simulated model runs in pieces of any length, and its sensitivities are its derivatives."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.signal import lfilter

from rtid.identify.held import HeldMap, held_map
from rtid.identify.recursion import all_pole
from rtid.identify.simulator import Simulator
from tests.identify.synthetic import held_response, lag, switching

Array = NDArray[np.float64]

ROWS = 120
PLANTS = {
    "first order": (1, np.array([math.log(2.0), math.log(8.0), 2.3])),
    "underdamped": (2, np.array([math.log(2.0), math.log(0.3), math.log(0.2), 3.6])),
    "overdamped": (2, np.array([math.log(2.0), math.log(0.3), math.log(2.0), 0.0])),
}
every_plant = pytest.mark.parametrize(("order", "at"), PLANTS.values(), ids=PLANTS.keys())


def model(order: int, at: Array) -> HeldMap:
    return held_map(order, at, sign=-1.0, period=1.0)


def drive() -> Array:
    rng = np.random.default_rng(5)
    return switching(rng, ROWS, 4) + rng.standard_normal(ROWS)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(cuts=st.sets(st.integers(1, ROWS - 1), max_size=ROWS), plant=st.sampled_from(sorted(PLANTS)))
def test_any_chopping_gives_the_same_digits(cuts: set[int], plant: str) -> None:
    order, at = PLANTS[plant]
    inputs = drive()
    whole = Simulator(model(order, at), depth=5, level=0.7).run(inputs)
    pieces = Simulator(model(order, at), depth=5, level=0.7)
    found = [pieces.run(inputs[a:b]) for a, b in pairwise((0, *sorted(cuts), ROWS))]
    assert np.array_equal(np.concatenate([x for x, _ in found]), whole[0])
    assert np.abs(np.concatenate([psi for _, psi in found]) - whole[1]).max() <= 1e-13 * np.abs(whole[1]).max()


@every_plant
def test_the_output_is_the_plant_s(order: int, at: Array) -> None:
    """scipy.linalg.expm, from rest."""
    inputs = drive()
    expected = -held_response(*lag(order, 2.0, tuple(np.exp(at[1:-1]))), float(at[-1]), inputs)
    x = Simulator(model(order, at), depth=5, level=0.0).run(inputs)[0]
    assert np.abs(x - expected).max() < 1e-10


@every_plant
def test_sensitivities_are_the_derivatives_of_the_output(order: int, at: Array) -> None:
    """Fourth-order central differences of the simulated output; the dead time from one side at a whole row."""
    inputs, h = drive(), 1e-3

    def output(point: Array) -> Array:
        return Simulator(model(order, point), depth=5, level=0.7).run(inputs)[0]

    psi = Simulator(model(order, at), depth=5, level=0.7).run(inputs)[1]
    for i in range(len(at)):
        step = h * np.eye(len(at))[i]
        if i == len(at) - 1 and at[i] == 0.0:
            forward = [output(at + k * step) for k in range(5)]
            expected = (-25 * forward[0] + 48 * forward[1] - 36 * forward[2] + 16 * forward[3] - 3 * forward[4]) / 12
        else:
            near, far = (output(at + k * step) - output(at - k * step) for k in (1, 2))
            expected = (8.0 * near - far) / 12
        assert np.abs(psi[:, i] - expected / h).max() < 1e-7


@every_plant
def test_after_a_restart_it_stands_at_the_steady_state(order: int, at: Array) -> None:
    """Gain times input for ever; of the parameters only the gain still matters: ∂x/∂ln|K| = x."""
    simulator = Simulator(model(order, at), depth=5, level=0.0)
    simulator.run(drive())
    simulator.restart(1.5)
    x, psi = simulator.run(np.full(50, 1.5))
    assert x == pytest.approx(np.full(50, -3.0), rel=1e-12)
    assert psi[:, 0] == pytest.approx(x, rel=1e-10)
    assert np.abs(psi[:, 1:]).max() < 1e-10


def test_other_parameters_go_on_from_the_shifted_outputs() -> None:
    order, at = PLANTS["underdamped"]
    simulator = Simulator(model(order, at), depth=5, level=0.0)
    before = simulator.run(drive())[0]
    other = model(order, at + 0.05)
    simulator.retune(other, (0.2, -0.1))
    after = simulator.run(np.zeros(3))[0]
    padded = np.concatenate((drive(), np.zeros(3)))
    forcing = sum(other.b[j] * padded[ROWS - other.d - 1 - j :][:3] for j in range(3))
    expected = all_pole(np.asarray(forcing), other.f, (before[-1] + 0.2, before[-2] - 0.1))[0]
    assert after == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("f", [(-0.9, 0.0), (-1.5, 0.7)])
def test_the_recursion_agrees_with_lfilter(f: tuple[float, float]) -> None:
    """scipy.signal.lfilter, whose state is that of the transposed direct form: (-f1 x1 - f2 x2, -f2 x1)."""
    inputs, start = drive(), (0.4, -0.2)
    x, state = all_pole(inputs, np.array(f), start)
    delays = [-f[0] * start[0] - f[1] * start[1], -f[1] * start[0]]
    assert x == pytest.approx(lfilter([1.0], [1.0, *f], inputs, zi=delays)[0], abs=1e-12)
    assert state == (x[-1], x[-2])
