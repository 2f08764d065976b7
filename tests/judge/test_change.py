"""How a change is measured against its tolerance, and which quantity is named."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from rtid.identify.delta import quantity_jacobian
from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.structure import Fit, Structure
from rtid.judge.baseline import Baseline
from rtid.judge.change import Judged, QuantityChange, leader, surest

DYNAMICS = ("time_constant_1", "time_constant_2", "natural_frequency", "damping_ratio")
TOLERANCES = {"gain": 0.1, "dead_time": 0.3} | dict.fromkeys(DYNAMICS, 0.2)
PERIOD = 1.0
ONE = OutputError(1, PERIOD, (0.0, 10.0))
TWO = OutputError(2, PERIOD, (0.0, 10.0))


def make_fit(theta: list[float], deviations: list[float], *, sign: float = 1.0) -> Fit:
    return Fit(
        theta=np.array(theta), covariance=np.diag(np.array(deviations) ** 2), sigma=0.1, noise=0.1, ar=np.zeros(0),
        rows=1000, centre=np.zeros(1), sign=sign, noise_rows=1000.0,
    )  # fmt: skip


def first_order(
    *, gain: float = 2.0, tau: float = 8.0, dead_time: float = 5.0, deviation: float = 0.01, sign: float = 1.0
) -> Fit:
    deviations = [deviation, deviation, 5.0 * deviation, deviation]
    return make_fit([math.log(gain), math.log(tau), dead_time, 5.0], deviations, sign=sign)


def second_order(*, damping: float, deviations: list[float] | None = None) -> Fit:
    return make_fit([0.5, math.log(0.2), math.log(damping), 5.0, 0.0], deviations or [0.01] * 3 + [0.05, 0.01])


def judged(fit: Fit, structure: Structure = ONE) -> Judged:
    values, jacobian = quantity_jacobian(structure, fit)
    gamma0 = np.asarray(np.linalg.pinv(fit.covariance) / 1000.0, dtype=np.float64)
    baseline = Baseline(fit, fit.covariance, 0.1, gamma0, values, jacobian, 0.0)
    return Judged(structure, baseline, TOLERANCES)


def changes(before: Fit, now: Fit) -> dict[str, QuantityChange]:
    return {change.name: change for change in judged(before).assess(now)}


def told(name: str, pct: float, half_width: float, *, tolerance: float = 10.0, surety: float = 9.0) -> QuantityChange:
    return QuantityChange(name, pct, pct - half_width, pct + half_width, tolerance, surety)


def test_limits_are_two_standard_errors_of_the_logarithm_with_the_baselines_own() -> None:
    change = changes(first_order(), first_order(gain=1.6))["gain"]
    error = math.sqrt(2.0) * 0.01
    expected = [100.0 * (0.8 * math.exp(k * error) - 1.0) for k in (0.0, -2.0, 2.0)]
    assert [change.change_pct, change.low_pct, change.high_pct] == pytest.approx(expected, rel=1e-6)
    assert change.surety == pytest.approx(-math.log(0.8) / error, rel=1e-6)
    assert change.tolerance_pct == 10.0


def test_unchanged_is_within_every_tolerance() -> None:
    found = changes(first_order(), first_order())
    assert set(found) == {"gain", "time_constant_1", "dead_time"}
    assert all(change.within and not change.beyond for change in found.values())


def test_dead_time_is_judged_in_percent_of_itself() -> None:
    change = changes(first_order(), first_order(dead_time=8.0))["dead_time"]
    error = 20.0 * math.sqrt(2.0) * 0.05
    assert [change.change_pct, change.low_pct, change.high_pct] == pytest.approx([60.0, 60 - 2 * error, 60 + 2 * error])
    assert change.tolerance_pct == pytest.approx(30.0)


@pytest.mark.parametrize(("dead_time", "scale"), [(2.0, 2.0), (0.0, 1.0)])
def test_the_tolerance_of_a_short_dead_time_is_one_row(dead_time: float, scale: float) -> None:
    """30 % of two rows could not be told from nothing; of no dead time there is no percentage, so of one row."""
    change = changes(first_order(dead_time=dead_time), first_order(dead_time=dead_time + 3.0))["dead_time"]
    assert change.change_pct == pytest.approx(300.0 / scale)
    assert change.tolerance_pct == pytest.approx(100.0 / scale)
    assert change.beyond


def test_a_reversed_sign_is_below_minus_100_percent_and_beyond() -> None:
    change = changes(first_order(), first_order(gain=1.0, sign=-1.0))["gain"]
    assert change.change_pct == pytest.approx(-150.0)
    assert change.low_pct < change.change_pct < change.high_pct == -100.0
    assert change.beyond


def test_a_gain_that_was_negative_is_compared_by_its_size() -> None:
    change = changes(first_order(sign=-1.0), first_order(gain=2.4, sign=-1.0))["gain"]
    assert change.change_pct == pytest.approx(20.0)


def test_time_constants_are_judged_where_they_exist_and_frequency_and_damping_elsewhere() -> None:
    assert judged(second_order(damping=2.0), TWO).names == ["gain", "time_constant_1", "time_constant_2", "dead_time"]
    assert judged(second_order(damping=0.5), TWO).names == ["gain", "natural_frequency", "damping_ratio", "dead_time"]


def test_a_quantity_that_does_not_exist_any_more_is_left_out() -> None:
    found = judged(second_order(damping=2.0), TWO).assess(second_order(damping=0.5))
    assert [change.name for change in found] == ["gain", "dead_time"]


def test_what_the_baseline_does_not_know_is_not_judged() -> None:
    unsure = second_order(damping=2.0, deviations=[0.01, 1.0, 1.0, 0.05, 0.01])
    assert judged(unsure, TWO).names[0] == "gain"
    assert "time_constant_2" not in judged(unsure, TWO).names


def test_a_known_dead_time_is_not_judged() -> None:
    fit = first_order()
    fit.covariance[-2, :] = fit.covariance[:, -2] = 0.0
    assert judged(fit).names == ["gain", "time_constant_1"]


def test_whole_rows_of_dead_time_bring_their_own_error() -> None:
    """Where the dead time is no parameter its error is that of the bank."""
    structure = EquationError(1, PERIOD, (0.0, 10.0))
    fit = replace(make_fit([-0.9, 0.2, 0.5], [0.001] * 3), delay=4, delay_error=0.3)
    change = {c.name: c for c in judged(fit, structure).assess(replace(fit, delay=6))}["dead_time"]
    error = 25.0 * 0.3 * math.sqrt(2.0)
    assert [change.change_pct, change.low_pct] == pytest.approx([50.0, 50.0 - 2.0 * error])


def test_half_used_looks_at_every_quantity() -> None:
    mine = judged(first_order())
    assert not mine.half_used(np.array([0.049, 0.099, 0.74, 5.0]))
    assert mine.half_used(np.array([0.051, 0.0, 0.0, 0.0]))
    assert mine.half_used(np.array([0.0, -0.101, 0.0, 0.0]))
    assert mine.half_used(np.array([0.0, 0.0, 0.76, 0.0]))


def test_the_gains_gradient_is_that_of_its_logarithm() -> None:
    assert judged(first_order()).gain_gradient == pytest.approx([1.0, 0.0, 0.0, 0.0], abs=1e-9)


@pytest.mark.parametrize(
    ("pct", "half_width", "beyond", "within"),
    [(15.0, 4.9, True, False), (15.0, 5.1, False, False), (-15.0, 4.9, True, False), (5.0, 4.9, False, True),
     (-5.0, 5.1, False, False)],
)  # fmt: skip
def test_beyond_and_within_are_said_only_when_sure(pct: float, half_width: float, beyond: bool, within: bool) -> None:
    change = told("gain", pct, half_width)
    assert (change.beyond, change.within) == (beyond, within)


def test_the_surest_beyond_is_named_before_a_larger_but_uncertain_one() -> None:
    sure, unsure = told("gain", -20.0, 2.0), told("time_constant_1", 200.0, 195.0)
    assert surest([unsure, sure]).name == "gain"


def test_while_none_is_beyond_the_one_whose_change_is_surest_is_the_worst() -> None:
    within = [told("gain", 2.0, 1.0, surety=4.0), told("dead_time", 8.0, 3.0, surety=5.0)]
    assert surest(within).name == "dead_time"


@pytest.mark.parametrize(
    ("sureties", "named"),
    [
        ((9.0, 5.0), "gain"),
        ((9.0, 7.0), None),
        ((3.9, 0.1), None),
        ((5.0, 9.0), "dead_time"),
        ((5.0,), "gain"),
        ((), None),
    ],
)
def test_a_leader_must_be_sure_and_clearly_ahead(sureties: tuple[float, ...], named: str | None) -> None:
    names = ("gain", "dead_time")
    found = leader([told(name, 5.0, 1.0, surety=s) for name, s in zip(names, sureties, strict=False)])
    assert (found.name if found else None) == named
