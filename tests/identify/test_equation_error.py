"""The regression of the ARX structure: its rows, its bank of dead times, its recursive form."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.signal import lfilter

from rtid.identify.delta import quantity_jacobian
from rtid.identify.equation_error import EquationError, Regressors
from rtid.identify.record import Record
from tests.identify.synthetic import guess, switching, whole_record

Array = NDArray[np.float64]

BLOCK = 16


def plant_with_process_noise(seed: int, rows: int, *, delay: int = 3, gain: float = 1.0, hold: int = 4) -> Record:
    """y(t) = 0.9y(t-1) + 0.1·gain·u(t-1-delay) + 0.02e(t), running before the first row; the offset is 1."""
    rng = np.random.default_rng(seed)
    u = switching(rng, rows + 200, hold)
    driven = lfilter([0.0] * (delay + 1) + [0.1 * gain], [1.0, -0.9], u)
    y = driven + lfilter([0.02], [1.0, -0.9], rng.standard_normal(rows + 200)) + 1.0
    return whole_record(u[200:], y[200:])


def batch(structure: EquationError, record: Record, delay: int) -> Array:
    """numpy.linalg.lstsq on rows written out one by one; no row reaches over a gap or a missing output."""
    ends = [*record.starts, len(record)]
    n, rows, outputs = structure.order, [], []
    good = record.ok & np.isfinite(record.output)
    for start, end in pairwise(ends):
        for t in range(start + structure.delays[-1] + n, end):
            past = [t - i for i in range(1, n + 1)]
            if good[t] and good[past].all() and good[t - structure.delays[-1] - n]:
                rows.append([*-record.output[past], *record.inputs[[p - delay for p in past], 0], 1.0])
                outputs.append(record.output[t])
    return np.asarray(np.linalg.lstsq(np.array(rows), np.array(outputs), rcond=None)[0])


@pytest.mark.parametrize("order", [1, 2])
def test_rows_are_those_of_the_definition_and_never_mix_two_sides_of_a_gap(order: int) -> None:
    clean = plant_with_process_noise(1, 500)
    output = clean.output.copy()
    output[[50, 51, 200]] = np.nan
    record = Record(clean.inputs, output, np.arange(500) != 320, (0, 130, 333))
    structure = EquationError(order, 1.0, (1.0, 5.0))
    fit = structure.refit(record, guess([0.0] * (2 * order + 1)))
    assert fit.theta == pytest.approx(batch(structure, record, fit.delay), rel=1e-8, abs=1e-10)


def test_regressors_are_the_same_in_pieces_of_any_length() -> None:
    record = plant_with_process_noise(2, 60)
    whole = Regressors(2, (0, 1, 2)).run(record.inputs[:, 0], record.output, record.ok)
    for length in (1, 3, 16):
        made = Regressors(2, (0, 1, 2))
        parts = [made.run(record.inputs[a : a + length, 0], record.output[a : a + length], record.ok[a : a + length])
                 for a in range(0, 60, length)]  # fmt: skip
        assert np.array_equal(np.concatenate([rows for rows, _ in parts], axis=1), whole[0])
        assert np.array_equal(np.concatenate([good for _, good in parts]), whole[1])


def test_the_bank_finds_the_dead_time() -> None:
    structure = EquationError(1, 0.5, (0.0, 4.0))
    fits = [structure.first_fit(plant_with_process_noise(seed, 400, delay=5)) for seed in range(10)]
    assert [fit.delay for fit in fits if fit is not None] == [5] * 10
    assert all(structure.quantities(fit.theta, fit)["dead_time"] == 2.5 for fit in fits if fit is not None)


def test_no_fit_of_a_short_record_or_a_resting_input() -> None:
    structure, record = EquationError(1, 1.0, (0.0, 4.0)), plant_with_process_noise(3, 400)
    assert structure.first_fit(record.part(0, 199)) is None
    resting = whole_record(np.zeros(400), np.random.default_rng(1).standard_normal(400))
    assert structure.first_fit(resting) is None


def test_recursive_is_batch_at_every_block_when_nothing_is_forgotten() -> None:
    """With a memory of 1e12 rows every block is learnt and none fades: the refit of all rows so far."""
    structure, record = EquationError(1, 1.0, (0.0, 4.0)), plant_with_process_noise(4, 800)
    first = structure.first_fit(record.part(0, 400))
    assert first is not None
    estimator = structure.estimator(first, record.part(0, 400), memory=1e12)
    for a in range(400, 800, BLOCK):
        part = record.part(a, a + BLOCK)
        estimator.step(part.inputs, part.output, part.ok)
        expected = structure.refit(record.part(0, a + BLOCK), first)
        assert estimator.fit.delay == expected.delay
        assert estimator.fit.theta == pytest.approx(expected.theta, rel=1e-8)
        assert estimator.fit.covariance == pytest.approx(expected.covariance, rel=1e-6)


def test_forgetting_weighs_the_rows_and_the_errors_know_it() -> None:
    """θ of weighted least squares, and Cov θ = σ²PSP with P = (Σwφφᵀ)⁻¹, S = Σw²φφᵀ: least squares whose weights are
    not the inverse of the noise's variances. The memory is long enough that every block brings news."""
    structure, record, memory = EquationError(1, 1.0, (3.0, 3.0)), plant_with_process_noise(7, 800), 4000.0
    first = structure.first_fit(record.part(0, 400))
    assert first is not None
    estimator = structure.estimator(first, record.part(0, 400), memory=memory)
    for a in range(400, 800, BLOCK):
        part = record.part(a, a + BLOCK)
        estimator.step(part.inputs, part.output, part.ok)
    y, u = record.output, record.inputs[:, 0]
    rows, output = np.column_stack((-y[3:-1], u[:-4], np.ones(796))), y[4:]
    block = np.maximum(0, np.arange(4, 800) - (400 - BLOCK)) // BLOCK  # 0 for what was there at the start
    weights = np.exp(-BLOCK / memory * (block.max() - block))
    p = np.linalg.inv((rows * weights[:, None]).T @ rows)
    theta = p @ (rows * weights[:, None]).T @ output
    variance = weights @ (output - rows @ theta) ** 2 / (weights.sum() - 3.0)
    expected = variance * p @ (rows * weights[:, None] ** 2).T @ rows @ p
    assert estimator.fit.theta == pytest.approx(theta, rel=1e-8)
    assert estimator.fit.covariance == pytest.approx(expected, rel=1e-6)


def test_the_predictor_leaves_the_noise_of_the_equation() -> None:
    record = plant_with_process_noise(5, 300)
    structure = EquationError(1, 1.0, (0.0, 5.0))
    fit = guess([-0.9, 0.1, 0.1])
    fit = type(fit)(**{name: getattr(fit, name) for name in fit.__dataclass_fields__} | {"delay": 3})
    residual, psi, good, predictor = structure.run(record, fit)
    expected = record.output[4:] - 0.9 * record.output[3:-1] - 0.1 * record.inputs[:-4, 0] - 0.1
    assert good.tolist() == [False] * 4 + [True] * 296
    assert residual[4:] == pytest.approx(expected, abs=1e-12)
    assert psi.shape == (300, 3)
    predictor.restart(np.zeros(1))
    assert not predictor.run(record.inputs[:2], record.output[:2], record.ok[:2])[2].any()


def test_time_constant_and_its_slope_from_the_pole() -> None:
    """τ = -h/ln a, dτ/da = h/(a ln²a): 9.491222 and 100.0925 at a = 0.9, h = 1 (references: handbook)."""
    structure = EquationError(1, 1.0, (0.0, 0.0))
    fit = guess([-0.9, 0.1, 0.0])
    values, jacobian = quantity_jacobian(structure, fit)
    row = list(values).index("time_constant_1")
    assert values["time_constant_1"] == pytest.approx(9.491222, abs=5e-7)
    assert -jacobian[row, 0] * values["time_constant_1"] == pytest.approx(100.0925, rel=1e-6)


def test_two_real_poles_have_time_constants_largest_first() -> None:
    structure = EquationError(2, 0.5, (0.0, 0.0))
    a = np.poly(np.exp([-0.5 / 4.05, -0.5 / 1.5]))
    fit = guess([*a[1:], 0.1, 0.0, 0.0])
    quantities = structure.quantities(fit.theta, fit)
    assert (quantities["time_constant_1"], quantities["time_constant_2"]) == pytest.approx((4.05, 1.5), rel=1e-9)
    assert quantities["natural_frequency"] == pytest.approx(1.0 / math.sqrt(4.05 * 1.5), rel=1e-9)
    assert quantities["damping_ratio"] == pytest.approx(0.5 * (1 / 4.05 + 1 / 1.5) * math.sqrt(4.05 * 1.5), rel=1e-9)
    assert structure.slowest(fit) == pytest.approx(4.05, rel=1e-9)
    assert structure.settling_rows(fit) == 41


@pytest.mark.parametrize("theta", [[1.2, 0.1, 0.0], [0.5, 0.1, 0.0], [-1.0, 0.1, 0.0], [0.0, 0.1, 0.0]])
def test_a_pole_that_no_plant_has_gives_no_time_constant(theta: list[float]) -> None:
    structure = EquationError(1, 1.0, (0.0, 0.0))
    assert math.isnan(structure.quantities(np.array(theta), guess(theta))["time_constant_1"])
    assert structure.settling_rows(guess(theta)) >= 0


@pytest.mark.parametrize(
    ("input_scale", "output_scale"), [(1e-3, 1e3), (1e6, 1e6), (1.0, 1e-6), (1.0, 1e-9), (1e-9, 1.0), (1e-9, 1e-9)]
)
def test_units_do_not_matter(input_scale: float, output_scale: float) -> None:
    structure, record = EquationError(1, 1.0, (0.0, 4.0)), plant_with_process_noise(6, 400)
    scaled = whole_record(record.inputs[:, 0] * input_scale, record.output * output_scale)
    plain, other = structure.first_fit(record), structure.first_fit(scaled)
    assert plain is not None
    assert other is not None
    assert other.delay == plain.delay
    assert other.theta[0] == pytest.approx(plain.theta[0], rel=1e-4)
    assert other.theta[1] == pytest.approx(plain.theta[1] * output_scale / input_scale, rel=1e-4)
