"""Output error from nothing: right, calibrated, at the bound, and not misled by outliers, offsets or noisy sensors."""

from __future__ import annotations

import math
from collections import defaultdict

import numpy as np
import pytest
from numpy.polynomial.polynomial import polymul
from numpy.typing import NDArray
from scipy.stats import chi2

from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.record import Record
from rtid.identify.structure import Fit
from tests.identify.random_plants import DEAD_TIME, draw, published_z
from tests.identify.synthetic import coloured, guess, held_response, lag, switching, whole_record

Array = NDArray[np.float64]

RUNS = 30
TAIL = 5e-4  # of the chi-square bands, on each side


def band(runs: int) -> tuple[float, float]:
    """Between these the root mean square of `runs` unit normal numbers lies, but for 2·TAIL of all cases."""
    low, high = np.sqrt(chi2.ppf([TAIL, 1.0 - TAIL], runs) / runs)
    return float(low), float(high)


# -- a noisy sensor -------------------------------------------------------------------------------------------------


def test_a_noisy_sensor_biases_the_regression_but_not_output_error() -> None:
    """White output noise at 10 dB, 20 records. Theory: least squares is biased by the share of noise in its
    regressors (Söderström & Stoica, ch. 2); output error is consistent: its mean lies within four of its errors."""
    arx, simulated = EquationError(1, 1.0, (2.0, 2.0)), OutputError(1, 1.0, (2.0, 2.0))
    misses = defaultdict(list)
    for seed in range(20):
        rng = np.random.default_rng(seed)
        u = switching(rng, 1200, 10)
        x = held_response(*lag(1, 2.0, (20.0,)), 2.0, u)
        record = whole_record(u[200:], (x + x.std() * 10**-0.5 * rng.standard_normal(1200))[200:])
        start = guess([0.5, 2.5, 2.0, 0.0])
        for structure in (arx, simulated):
            fit = structure.refit(record, start)
            misses[structure].append(math.log(structure.quantities(fit.theta, fit)["gain"] / 2.0))
    assert abs(np.mean(misses[simulated])) < 4.0 * np.std(misses[simulated], ddof=1) / math.sqrt(20)
    assert np.mean(misses[arx]) < -0.1


# -- calibration ----------------------------------------------------------------------------------------------------

PLANTS = 20


def first_z(order: int) -> list[dict[str, float]]:
    structure = OutputError(order, 1.0, DEAD_TIME)
    found = []
    for seed in range(PLANTS):
        drawn = draw(order, seed, rows=800)
        fit = structure.first_fit(drawn.record)
        found.append(published_z(structure, fit, drawn.truth) if fit is not None else {})
    return found


def assert_calibrated(found: list[dict[str, float]]) -> None:
    """No published value beyond 5 standard errors, and the z of all quantities together of unit size.

    The quantities of one fit are correlated, so that they count as one number: the band is that of PLANTS numbers.
    """
    assert sum(bool(z) for z in found) >= 0.9 * PLANTS
    values = np.array([v for z in found for v in z.values()])
    assert np.abs(values).max() < 5.0
    low, high = band(PLANTS)
    assert low < np.sqrt(np.mean(values**2)) < high


def test_standard_errors_of_first_fits_are_calibrated_at_order_two() -> None:
    assert_calibrated(first_z(2))


def test_standard_errors_of_first_fits_are_calibrated_at_order_one() -> None:
    assert_calibrated(first_z(1))


BETWEEN_ROWS = 5.75  # a dead time whose nearest whole row lies in the next sample interval


def between_rows(seed: int) -> Record:
    """Order 1, fast random steps, coloured noise at 11 dB."""
    rng = np.random.default_rng(seed)
    u = switching(rng, 2300, 1)
    x = held_response(*lag(1, 2.0, (23.0,)), BETWEEN_ROWS, u)[300:]
    return whole_record(u[300:], x + x.std() * 10 ** (-11 / 20) * coloured(rng, 2000, 0.6))


def dead_time_z(fit: Fit) -> float:
    return float(fit.theta[-2] - BETWEEN_ROWS) / math.sqrt(fit.covariance[-2, -2])


def test_a_first_dead_time_lies_in_the_right_sample_interval() -> None:
    """The loss has a local minimum in every sample interval; polishing the best whole dead time alone left 25 of 30
    such records 16 to 20 standard errors off."""
    for seed in range(1, 5):
        fit = OutputError(1, 1.0, DEAD_TIME).first_fit(between_rows(seed))
        assert fit is not None
        assert abs(dead_time_z(fit)) < 5.0


def test_a_thorough_refit_leaves_the_wrong_sample_interval() -> None:
    structure, record = OutputError(1, 1.0, DEAD_TIME), between_rows(2)
    fit = structure.refit(record, guess([math.log(2.0), math.log(23.0), 2.5, 0.0]))
    assert fit.theta[-2] == pytest.approx(2.5, abs=0.5)  # the nearest local minimum, not the dead time
    assert abs(dead_time_z(structure.refit(record, fit, thorough=True))) < 5.0


@pytest.mark.parametrize(("order", "shape"), [(1, (8.0,)), (2, (0.3, 0.6))])
def test_dead_time_is_right_within_half_a_row(order: int, shape: tuple[float, ...]) -> None:
    """Three rows, random steps, 10 dB, 500 rows: in every one of 12 records."""
    structure = OutputError(order, 1.0, (0.0, 10.0))
    for seed in range(12):
        rng = np.random.default_rng(seed)
        u = switching(rng, 700, 3)
        x = held_response(*lag(order, 2.0, shape), 3.0, u)
        fit = structure.first_fit(whole_record(u[200:], (x + x.std() * 10**-0.5 * rng.standard_normal(700))[200:]))
        assert fit is not None
        assert structure.quantities(fit.theta, fit)["dead_time"] == pytest.approx(3.0, abs=0.5)


# -- the bound ------------------------------------------------------------------------------------------------------

SKIPPED = 12  # the first rows, whose input lies before the record
BOUND_PLANTS = {1: (2.0, (12.0,), 2.4), 2: (2.0, (0.25, 0.5), 1.6)}  # gain, shape, dead time


def exact_sensitivities(order: int, inputs: Array) -> Array:
    """∂y/∂(ln K, ln τ or (ln ω, ln ζ), L, offset): each the response of its own continuous system, (N, p).

    ∂G/∂ln τ = -Kτs/(τs+1)²; with D = (s/ω)² + 2ζs/ω + 1: ∂G/∂ln ω = K(2(s/ω)² + 2ζs/ω)/D², ∂G/∂ln ζ = -K·2ζ(s/ω)/D²;
    ∂/∂L = -sG.
    """
    gain, shape, dead_time = BOUND_PLANTS[order]
    numerator, below = lag(order, gain, shape)
    squared = polymul(below[::-1], below[::-1])[::-1].tolist()
    if order == 1:
        by_shape = [[-gain * shape[0], 0.0]]
    else:
        w, z = shape
        by_shape = [[2.0 * gain / w**2, 2.0 * gain * z / w, 0.0], [-2.0 * gain * z / w, 0.0]]
    systems = [(numerator, below), *((n, squared) for n in by_shape), ([-gain, 0.0], below)]
    columns = [held_response(n, d, dead_time, inputs) for n, d in systems]
    return np.column_stack((*columns, np.ones(len(inputs))))


def errors_over_bounds(order: int, *, outliers: float) -> Array:
    """(θ - truth) over its Cramér-Rao deviation under the noise without outliers, (RUNS, p)."""
    gain, shape, dead_time = BOUND_PLANTS[order]
    structure = OutputError(order, 1.0, (0.0, 6.0))
    truth = np.array([math.log(gain), *np.log(shape), dead_time, 0.5])
    ratios = []
    for seed in range(RUNS):
        rng = np.random.default_rng(seed)
        u = switching(rng, 1000, 4)
        x = held_response(*lag(order, gain, shape), dead_time, u)
        sigma = x.std() * 10**-0.5
        drawn = rng.standard_normal(1000) * np.where(rng.random(1000) < outliers, 10.0, 1.0)
        psi = exact_sensitivities(order, u)[SKIPPED:]
        bound = sigma * np.sqrt(np.diag(np.linalg.inv(psi.T @ psi)))
        start = guess((truth + [0.2, *([-0.2] * order), 0.05, -0.5]).tolist())
        fit = structure.refit(whole_record(u, x + 0.5 + sigma * drawn), start)
        ratios.append((fit.theta - truth) / bound)
    return np.array(ratios)


@pytest.mark.parametrize("order", [1, 2])
def test_errors_are_at_the_cramer_rao_bound(order: int) -> None:
    """10 dB white noise, 1000 rows: rms error over bound of every parameter within the chi-square band of 30 runs
    round 1, none beyond six bounds."""
    ratios = errors_over_bounds(order, outliers=0.0)
    low, high = band(RUNS)
    rms = np.sqrt(np.mean(ratios**2, axis=0))
    assert ((rms > low) & (rms < high)).all(), rms
    assert np.abs(ratios).max() < 6.0


def test_outliers_cost_little() -> None:
    """5 % of ten deviations: at most 1.5 bounds of the clean noise (core figures); unweighted least squares would
    have √(0.95 + 0.05·100) = 2.4."""
    ratios = errors_over_bounds(1, outliers=0.05)
    assert np.sqrt(np.mean(ratios**2)) < 1.5


# -- what is refused, what is known -----------------------------------------------------------------------------------


def test_no_fit_of_a_short_record_a_resting_input_or_a_slow_plant() -> None:
    structure, rng = OutputError(1, 1.0, (0.0, 5.0)), np.random.default_rng(1)
    u = switching(rng, 400, 8)
    noise = 0.05 * rng.standard_normal(400)
    assert structure.first_fit(whole_record(u[:199], held_response([2.0], [8.0, 1.0], 1.0, u)[:199])) is None
    assert structure.first_fit(whole_record(np.full(400, 3.0), noise)) is None
    assert structure.first_fit(whole_record(u, held_response([2.0], [300.0, 1.0], 1.0, u) + noise)) is None
    assert structure.first_fit(whole_record(u, held_response([2.0], [8.0, 1.0], 1.0, u) + noise)) is not None


def test_a_known_dead_time_stays_and_is_certain() -> None:
    structure, rng = OutputError(1, 1.0, (2.3, 2.3)), np.random.default_rng(1)
    u = switching(rng, 600, 8)
    y = held_response([-2.0], [8.0, 1.0], 2.3, u) + 0.1 * rng.standard_normal(600)
    fit = structure.first_fit(whole_record(u, y))
    assert fit is not None
    assert (fit.theta[2], fit.covariance[2, 2], fit.sign) == (2.3, 0.0, -1.0)
    z = published_z(structure, fit, {"gain": -2.0, "time_constant_1": 8.0, "offset": 0.0})
    assert max(map(abs, z.values())) < 4.0


@pytest.mark.parametrize("scale", [1e-9, 1e-3, 1e6])
def test_units_do_not_matter(scale: float) -> None:
    structure, rng = OutputError(1, 1.0, (0.0, 5.0)), np.random.default_rng(1)
    u = switching(rng, 600, 8)
    y = held_response([2.0], [8.0, 1.0], 1.4, u) + 0.1 * rng.standard_normal(600)
    plain, scaled = (structure.first_fit(whole_record(u * a, y * b)) for a, b in ((1.0, 1.0), (1.0 / scale, scale)))
    assert plain is not None
    assert scaled is not None
    assert structure.quantities(scaled.theta, scaled)["gain"] == pytest.approx(
        scale**2 * structure.quantities(plain.theta, plain)["gain"], rel=1e-4
    )


@pytest.mark.parametrize(("order", "shape"), [(1, (8.0,)), (2, (0.3, 0.4))])
def test_the_transfer_function_is_the_plant_s(order: int, shape: tuple[float, ...]) -> None:
    """Its impulse response against scipy.linalg.expm; the leading zero is the hold of one row."""
    structure = OutputError(order, 1.0, (0.0, 5.0))
    fit = guess([math.log(2.0), *np.log(shape), 2.3, 0.0])
    numerator, denominator, delay = structure.transfer(fit)[0]
    assert (numerator[0], denominator[0], delay, len(denominator)) == (0.0, 1.0, 2, order + 1)
    impulse = np.eye(1, 40)[0]
    ours = np.zeros(40)
    for t in range(40):
        past = [numerator[j] * impulse[t - delay - j] for j in range(len(numerator)) if t - delay - j >= 0]
        ours[t] = sum(past) - sum(denominator[i] * ours[t - i] for i in range(1, order + 1) if t >= i)
    assert ours == pytest.approx(held_response(*lag(order, 2.0, shape), 2.3, impulse), abs=1e-10)


def test_settling_is_the_dead_time_and_five_of_the_largest_time_constant() -> None:
    slow = OutputError(2, 0.5, (0.0, 5.0))
    fit = guess([0.0, math.log(0.2), math.log(1.3), 2.0, 0.0])
    poles = np.roots([1.0 / 0.04, 2.6 / 0.2, 1.0])
    assert slow.slowest(fit) == pytest.approx(-1.0 / poles.max(), rel=1e-12)
    assert slow.settling_rows(fit) == math.ceil((2.0 - 5.0 / poles.max()) / 0.5)


def test_behind_a_gap_the_model_stands_at_the_steady_state_and_settles_unscored() -> None:
    """Constant input on each side of the gap: the model output is K·u + offset from the first row behind it on."""
    structure = OutputError(1, 1.0, (0.0, 4.0))
    u = np.repeat([1.0, 3.0], 100)
    record = Record(u[:, None], np.zeros(200), np.ones(200, dtype=np.bool_), (0, 100))
    fit = guess([math.log(2.0), math.log(8.0), 1.5, 0.25], centre=1.0)
    residual, _, scored, _ = structure.run(record, fit)
    assert residual == pytest.approx(-(2.0 * (u - 1.0) + 0.25), abs=1e-12)
    settling = structure.settling_rows(fit)
    assert scored[100:].tolist() == [False] * settling + [True] * (100 - settling)


def test_a_gap_is_no_plant_motion() -> None:
    """Two stretches that rest at different levels: what happened in between must not be read as dynamics."""
    structure, rng = OutputError(1, 1.0, (2.0, 2.0)), np.random.default_rng(2)
    u = switching(rng, 1000, 8) + np.where(np.arange(1000) < 500, 0.0, 10.0)
    x = np.concatenate([held_response([2.0], [8.0, 1.0], 2.0, np.concatenate((np.full(200, p[0]), p)))[200:]
                        for p in (u[:500], u[500:])])  # fmt: skip
    record = Record(u[:, None], x + 0.1 * rng.standard_normal(1000), np.ones(1000, dtype=np.bool_), (0, 500))
    fit = structure.first_fit(record)
    assert fit is not None
    z = published_z(structure, fit, {"gain": 2.0, "time_constant_1": 8.0, "offset": 0.0})
    assert max(map(abs, z.values())) < 4.0
