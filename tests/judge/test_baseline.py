"""When a record makes a baseline, why it is refused, and how well the baseline knows itself."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.signal import lfilter  # type: ignore[import-untyped]

from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.record import Record
from rtid.identify.structure import Fit, Structure
from rtid.identify.whitening import Whitener
from rtid.judge.baseline import Baseline, Follower, Refusal, accept
from rtid.plants.linear import LinearPlant, first_order, simulate
from tests.support.plants import PERIOD_S, Array, changed, prbs

TOLERANCES = {"gain": 0.1, "time_constant_1": 0.2, "dead_time": 0.3}
PLANT = first_order(2.0, 8 * PERIOD_S, dead_time_s=2 * PERIOD_S, noise=0.2, offset=5.0)
STRUCTURE = OutputError(1, PERIOD_S, (0.0, 4 * PERIOD_S))


def recorded(drive: Array, plant: LinearPlant = PLANT, *, seed: int = 1, **simulation: Any) -> Record:
    output = simulate(plant, drive, period_s=PERIOD_S, seed=seed, **simulation)
    return Record(drive[:, None], output, np.ones(len(drive), dtype=np.bool_), (0,))


def first_fit(record: Record, structure: Structure = STRUCTURE) -> Fit:
    fit = structure.first_fit(record)
    assert fit is not None
    return fit


def judge(record: Record, fit: Fit | None = None, *, structure: Structure = STRUCTURE) -> Any:
    return accept(structure, record, fit or first_fit(record, structure), tolerances=TOLERANCES, stamp=7.0)


def baseline_of(record: Record) -> tuple[Baseline, Follower]:
    found = judge(record)
    assert not isinstance(found, Refusal), found
    return found  # type: ignore[no-any-return]


def test_a_good_record_is_accepted_and_knows_the_plant() -> None:
    baseline, _ = baseline_of(recorded(prbs(1200, bit=12)))
    truth = {"gain": 2.0, "time_constant_1": 2.0}
    error = np.sqrt(np.diag(baseline.jacobian @ baseline.covariance @ baseline.jacobian.T))
    for i, (name, value) in enumerate(baseline.values.items()):
        if name in truth:
            assert abs(np.log(value / truth[name])) < 4.0 * error[i] < 0.2
    assert baseline.unit == pytest.approx(0.2, rel=4.0 / np.sqrt(2 * 1200))
    assert baseline.stamp == 7.0


def test_refused_while_shorter_than_twenty_time_constants() -> None:
    slow = changed(PLANT, lags=(40 * PERIOD_S,))
    refusal = judge(recorded(prbs(600, bit=40), slow))
    assert isinstance(refusal, Refusal)
    assert "20 time constants" in refusal.reason
    assert not refusal.stale_half


@pytest.mark.parametrize("swing", [0.0, 0.002])
def test_refused_while_the_input_is_quiet(swing: float) -> None:
    lively = first_fit(recorded(prbs(1200, bit=12)))
    refusal = judge(recorded(1.0 + swing * prbs(1500, bit=12)), lively)
    assert isinstance(refusal, Refusal)
    assert "input must move" in refusal.reason
    assert not refusal.stale_half


@pytest.mark.parametrize(
    ("name", "later"),
    [
        ("gain", changed(PLANT, gain=1.5)),
        ("time_constant_1", changed(PLANT, slower=1.6)),
        ("dead_time", changed(PLANT, dead_time_s=4 * PERIOD_S)),
    ],
)
def test_refused_when_the_halves_disagree_and_the_older_half_is_to_go(name: str, later: LinearPlant) -> None:
    refusal = judge(recorded(prbs(1400, bit=12), changes={700: later}))
    assert isinstance(refusal, Refusal)
    assert refusal.stale_half
    assert refusal.reason.startswith(f"learning: {name} moved from ")
    assert refusal.reason.endswith("the older half was dropped")


def test_an_offset_that_moves_alone_is_no_drift_of_the_plant() -> None:
    assert not isinstance(judge(recorded(prbs(1400, bit=12), changes={700: changed(PLANT, offset=5.5)})), Refusal)


def test_refused_when_the_data_cannot_tell_the_parameters_apart() -> None:
    """A first-order plant without noise has an exact pole and zero to spare in a model of order 2."""
    structure = EquationError(2, PERIOD_S, (2 * PERIOD_S, 2 * PERIOD_S))
    record = recorded(prbs(1500, bit=12), changed(PLANT, noise=0.0, offset=0.0))
    refusal = judge(record, structure=structure)
    assert isinstance(refusal, Refusal)
    assert "input must move" in refusal.reason


def as_if_white(record: Record, fit: Fit) -> Array:
    """Covariance of θ, (p, p), if the whitened residual of the fit were white."""
    whitener = Whitener(len(fit.theta))
    whitener.coefficients = fit.ar
    e, phi, good = whitener.run(*STRUCTURE.run(record, fit)[:3])
    return np.asarray(np.var(e[good]) * np.linalg.inv(phi[good].T @ phi[good]))


def under_noise(drive: Array, noise: Array) -> Record:
    quiet = recorded(drive, changed(PLANT, noise=0.0)).output
    return Record(drive[:, None], quiet + noise, np.ones(len(drive), dtype=np.bool_), (0,))


def moving_average(rows: int, *, over: int, seed: int) -> Array:
    """Noise of deviation 0.2; over ten rows an autoregression of order 4 does not whiten it."""
    white = np.random.default_rng(seed).standard_normal(rows + over)
    return np.asarray(0.2 / np.sqrt(over) * lfilter(np.ones(over), [1.0], white)[over:])


def test_the_stated_errors_are_the_spread_of_repeated_records_under_coloured_noise() -> None:
    """The deviation over 16 records is itself known to 18 %; three times that, and 10 % for the noise model."""
    drive = prbs(1500, bit=12)
    baseline, _ = baseline_of(under_noise(drive, moving_average(1500, over=10, seed=0)))
    records = [under_noise(drive, moving_average(1500, over=10, seed=1 + k)) for k in range(16)]
    spread = np.std([STRUCTURE.refit(record, baseline.fit).theta for record in records], axis=0)
    assert (spread / np.sqrt(np.diag(baseline.covariance)))[:-1] == pytest.approx(np.ones(3), abs=0.65)


def test_correlation_that_the_noise_model_leaves_widens_the_covariance() -> None:
    """Under a square wave of half-period 10 and a moving average of 10 rows the whitened residual is anticorrelated
    ten rows apart, as the sensitivities are, so their products go together."""
    drive = np.tile(np.repeat([-1.0, 1.0], 10), 100)
    record = under_noise(drive, moving_average(2000, over=10, seed=2))
    baseline, _ = baseline_of(record)
    assert baseline.covariance[0, 0] > 1.2 * as_if_white(record, baseline.fit)[0, 0]


def test_white_noise_leaves_the_covariance_alone() -> None:
    record = recorded(prbs(2000, bit=12))
    baseline, _ = baseline_of(record)
    assert np.diag(baseline.covariance) == pytest.approx(np.diag(as_if_white(record, baseline.fit)), rel=0.2)


def test_a_known_dead_time_has_no_uncertainty() -> None:
    structure = OutputError(1, PERIOD_S, (2 * PERIOD_S, 2 * PERIOD_S))
    baseline, _ = judge(recorded(prbs(1200, bit=12)), structure=structure)
    assert baseline.values["dead_time"] == 2 * PERIOD_S
    assert not baseline.covariance[-2].any()
    assert not baseline.covariance[:, -2].any()


def test_the_follower_goes_on_behind_the_record_with_white_innovations_of_deviation_one() -> None:
    drive = prbs(3000, bit=12)
    whole = recorded(drive)
    _, follower = baseline_of(whole.part(0, 1500))
    e, phi = follower.run(whole.inputs[1500:], whole.output[1500:], whole.ok[1500:])
    assert len(e) == len(phi) == 1500
    assert e.std() == pytest.approx(1.0, abs=4.0 / np.sqrt(2 * 1500) + 0.1)
    assert abs(float(np.mean(e[1:] * e[:-1]))) < 4.0 / np.sqrt(1500)


def test_the_follower_skips_rows_that_do_not_count() -> None:
    whole = recorded(prbs(1600, bit=12))
    _, follower = baseline_of(whole.part(0, 1500))
    output, ok = whole.output[1500:].copy(), whole.ok[1500:].copy()
    output[10], ok[50] = np.nan, False
    e, phi = follower.run(whole.inputs[1500:], output, ok)
    assert np.isfinite(e).all()
    assert np.isfinite(phi).all()
    assert len(e) <= 98
