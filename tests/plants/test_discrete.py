"""The discretisation agrees with scipy's and with a published motor."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.signal import cont2discrete

from rtid.plants.discrete import delayed, held, matrix_exponential
from rtid.plants.motor import COPPER_PER_KELVIN, Motor, RunningMotor


@pytest.mark.parametrize("size", [1, 2, 3, 4])
def test_the_matrix_exponential_agrees_with_scipy(size: int) -> None:
    rng = np.random.default_rng(size)
    for scale in (1e-6, 0.1, 1.0, 20.0):
        matrix = scale * rng.standard_normal((size, size))
        expected = expm(matrix)
        assert np.abs(matrix_exponential(matrix) - expected).max() <= 1e-11 * np.abs(expected).max()


def test_the_exponential_of_nothing_is_the_identity() -> None:
    assert np.array_equal(matrix_exponential(np.zeros((2, 2))), np.eye(2))


def test_a_held_input_agrees_with_scipy() -> None:
    a, b = np.array([[-3.0, 1.0], [0.5, -0.2]]), np.array([[1.0, 0.0], [0.3, -2.0]])
    ad, bd = held(a, b, 0.4)
    expected = cont2discrete((a, b, np.eye(2), np.zeros((2, 2))), 0.4)
    assert np.allclose(ad, expected[0], rtol=1e-13, atol=0.0)
    assert np.allclose(bd, expected[1], rtol=1e-13, atol=0.0)


@pytest.mark.parametrize(
    ("dead_time_s", "delay", "later", "earlier"),
    [
        (2.0, 2, 0.190325164, 0.0),
        (2.3, 2, 0.135212360, 0.055112804),
    ],
)
def test_dead_time_splits_the_input_as_in_the_worked_case(
    dead_time_s: float, delay: int, later: float, earlier: float
) -> None:
    """Zero-order hold of K = 2, T = 10 at 1 s; derived by hand from the step response."""
    step = delayed(np.array([[-0.1]]), np.array([[0.2]]), period_s=1.0, dead_time_s=dead_time_s)
    assert step.delay == delay
    assert step.ad[0, 0] == pytest.approx(0.904837418, abs=1e-9)
    assert step.later[0, 0] == pytest.approx(later, abs=1e-9)
    assert step.earlier[0, 0] == pytest.approx(earlier, abs=1e-9)


def test_a_dead_time_of_whole_periods_is_not_lost_to_rounding() -> None:
    step = delayed(np.array([[-1.0]]), np.array([[1.0]]), period_s=0.1, dead_time_s=0.3)
    assert step.delay == 3
    assert abs(step.earlier[0, 0]) < 1e-12


HANDBOOK = Motor(resistance=2.0, inductance=1.5e-3, back_emf=0.05, torque=0.05, inertia=1e-4, friction=0.0)


def test_the_handbook_motor_has_its_poles_and_its_speed() -> None:
    """R 2, L 1.5 mH, K 0.05, J 1e-4: poles -12.61944 and -1320.714, 240 rad/s at 12 V."""
    slow, fast = HANDBOOK.poles
    assert slow.real == pytest.approx(-12.61944, abs=1e-5)
    assert fast.real == pytest.approx(-1320.714, abs=1e-3)
    assert 12.0 * HANDBOOK.gain == pytest.approx(240.0, rel=1e-12)
    assert HANDBOOK.time_constants_s == pytest.approx((79.243e-3, 0.7572e-3), rel=1e-4)


def test_the_running_motor_reaches_its_gain_with_its_time_constants() -> None:
    running = RunningMotor(Motor(), 0.01)
    speeds = np.array([running.advance(10.0) for _ in range(600)])
    assert speeds[-1] == pytest.approx(10.0 * Motor().gain, rel=1e-4)
    poles = np.array(Motor().poles)
    modes = np.exp(np.outer(np.arange(1, 601) * 0.01, poles)).real
    expected = (
        10.0
        * Motor().gain
        * (1.0 + (modes[:, 0] * poles[1].real - modes[:, 1] * poles[0].real) / (poles[0] - poles[1]).real)
    )
    assert np.allclose(speeds, expected, rtol=0.0, atol=1e-9)


def test_a_load_slows_the_motor_by_its_resistance() -> None:
    loaded, free = RunningMotor(Motor(), 0.01), RunningMotor(Motor(), 0.01)
    for _ in range(1000):
        loaded.advance(10.0, 0.5)
        free.advance(10.0)
    expected = 0.5 * Motor().resistance / (Motor().resistance * Motor().friction + 0.16)
    assert free.speed - loaded.speed == pytest.approx(expected, rel=1e-6)


def test_a_warm_winding_follows_copper() -> None:
    """Copper at 100 degC has 1.3144 of its resistance at 20 degC (IEC 60028)."""
    warm = Motor().aged(warmer_k=80.0, friction_factor=1.5)
    assert warm.resistance / Motor().resistance == pytest.approx(1.0 + 80.0 * COPPER_PER_KELVIN, rel=1e-12)
    assert warm.resistance / Motor().resistance == pytest.approx(1.3144, abs=1e-4)
    assert warm.gain < Motor().gain


def test_changing_the_motor_keeps_it_in_motion() -> None:
    running = RunningMotor(Motor(), 0.01)
    for _ in range(100):
        running.advance(12.0)
    before = running.speed
    running.become(Motor().aged(warmer_k=40.0, friction_factor=1.8))
    assert running.speed == before
    assert abs(running.advance(12.0) - before) < 0.5


def test_an_oscillating_motor_has_no_time_constants() -> None:
    light = Motor(inertia=0.005)
    assert light.time_constants_s is None
    assert light.damping_ratio < 1.0
    assert light.natural_frequency == pytest.approx((0.2 / (0.1 * 0.005)) ** 0.5, rel=1e-9)
