"""The estimate that follows the plant: quiet stretches leave it alone, a changed plant is followed, nonsense survived.

The scenario of the quiet plant: K 4, τ 25, dead time 4, σ 0.8, memory 400, random steps, then 20 000 quiet rows, then
the gain falls by 30 % and the steps go on. Its figures are printed (pytest -s).
"""

from __future__ import annotations

import copy
import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from rtid.identify.equation_error import EquationError
from rtid.identify.following import FollowingEstimator
from rtid.identify.output_error import OutputError
from rtid.identify.structure import Estimator, Structure, restored_estimator
from tests.identify.synthetic import guess, held_response, lag, switching, whole_record

Array = NDArray[np.float64]

BLOCK, MEMORY = 16, 400.0
LEARNED, LIVELY, QUIET, AFTER = 2000, 4000, 20_000, 2400
GAIN, CONSTANT, DEAD_TIME, SIGMA = 4.0, 25.0, 4.0, 0.8
DROP = 0.7
HIGH = 4.0  # the input steps between ±HIGH


@dataclass(frozen=True)
class Course:
    """At every block end: rows since the quiet stretch began, gain over its first value, time constant, covariance."""

    row: NDArray[np.int64]
    gain: Array
    constant: Array
    covariance: Array

    def during(self, first: int, last: int) -> NDArray[np.bool_]:
        return (self.row > first) & (self.row <= last)

    @property
    def excursion(self) -> float:
        """Of the gain in the quiet stretch, as a share of what it was when that began."""
        gain = self.gain[self.during(0, QUIET)]
        return float(np.abs(gain / gain[0] - 1.0).max())

    @property
    def back(self) -> int:
        """Rows after the change until the gain stays within 10 % of the new one."""
        outside = self.row[self.during(QUIET, QUIET + AFTER) & (np.abs(self.gain / DROP - 1.0) > 0.1)]
        return int(outside.max()) - QUIET if len(outside) else 0

    @property
    def late(self) -> float:
        """Relative error of the gain at the end."""
        return float(self.gain[self.row > QUIET + AFTER - 800].mean()) / DROP - 1.0

    def __str__(self) -> str:
        largest = np.linalg.eigvalsh(self.covariance[self.during(0, QUIET)][:, :2, :2]).max()
        return (
            f"excursion {100 * self.excursion:.2f} %, P {largest:.4f}, "
            f"within 10 % after {self.back} rows, late {100 * self.late:+.2f} %"
        )


def follow(*, seed: int, rest: float = 0.0, sign: float = 1.0, most_dead_time: float = 10.0) -> Course:
    """Steps, the quiet stretch at the input `rest`, a gain 30 % lower, steps. A known dead time: most = DEAD_TIME."""
    rng = np.random.default_rng(seed)
    moved = LEARNED + LIVELY
    u = np.concatenate((switching(rng, moved, 20), np.full(QUIET, rest / HIGH), switching(rng, AFTER, 20))) * HIGH
    drive = u * np.where(np.arange(len(u)) < moved + QUIET, 1.0, DROP)
    y = held_response(*lag(1, sign * GAIN, (CONSTANT,)), DEAD_TIME, drive) + SIGMA * rng.standard_normal(len(u))
    record = whole_record(u[:LEARNED], y[:LEARNED])
    structure = OutputError(1, 1.0, (DEAD_TIME if most_dead_time == DEAD_TIME else 0.0, most_dead_time))
    fit = structure.refit(record, guess([1.4, 3.2, 4.0, 0.0], sign=sign))
    estimator = structure.estimator(fit, record, memory=MEMORY)
    found = []
    for a in range(LEARNED, len(u), BLOCK):
        piece = slice(a, a + BLOCK)
        estimator.step(u[piece, None], y[piece], np.ones(len(u[piece]), dtype=np.bool_))
        now = structure.quantities(estimator.fit.theta, estimator.fit)
        found.append((a + BLOCK - moved, now["gain"] / (sign * GAIN), now["time_constant_1"], estimator.fit.covariance))
    assert not estimator.invalid
    return Course(*(np.array(column) for column in zip(*found, strict=True)))


@pytest.mark.parametrize(
    ("rest", "sign", "most_dead_time"),
    [(HIGH, 1.0, 10.0), (-HIGH, -1.0, 10.0), (0.0, -1.0, DEAD_TIME)],
    ids=["input at one end", "negative gain", "known dead time"],
)
def test_a_quiet_plant_keeps_its_estimate(rest: float, sign: float, most_dead_time: float) -> None:
    """The core figures for this forgetting: excursion at most 3 %, P of the log terms at most 0.02."""
    course = follow(seed=3, rest=rest, sign=sign, most_dead_time=most_dead_time)
    print(course)
    assert course.excursion < 0.03
    assert np.linalg.eigvalsh(course.covariance[course.during(0, QUIET)][:, :2, :2]).max() < 0.02


def test_a_changed_plant_is_followed() -> None:
    """The core figures: at most 80 rows to stay within 10 % (measured there: 32 to 48), late error at most 1 %.

    The median of five seeds; a late error is the mean of two memories, whose standard error is the reported one.
    """
    courses = [follow(seed=seed) for seed in range(5)]
    for course in courses:
        print(course)
        assert course.excursion < 0.03
        assert abs(course.late) < 4.0 * math.sqrt(course.covariance[-1, 0, 0])
        assert course.constant[course.row > QUIET + 1600].mean() == pytest.approx(CONSTANT, rel=0.1)
    assert 0 < np.median([course.back for course in courses]) <= 80
    assert abs(np.median([course.late for course in courses])) < 0.01


@pytest.mark.parametrize(
    ("sign", "most_dead_time"), [(-1.0, 10.0), (1.0, DEAD_TIME)], ids=["negative gain", "known dead time"]
)
def test_a_changed_plant_is_followed_whatever_its_sign(sign: float, most_dead_time: float) -> None:
    course = follow(seed=1, sign=sign, most_dead_time=most_dead_time)
    print(course)
    assert 0 < course.back <= MEMORY
    assert abs(course.late) < 4.0 * math.sqrt(course.covariance[-1, 0, 0])


@pytest.mark.xfail(
    strict=True,
    reason="after a quiet stretch at one end of the input a lower gain contradicts the well-known level there: "
    "the gain first rises, A(q) whitens the misfit away, and it takes 2300 rows and more, 6 memories (with "
    "A(q) held 1400 to 1600; 32 to 224 when the input rested in the middle; neither clipping nor walk plays a part)",
)
def test_a_changed_plant_is_followed_from_rest_at_one_end() -> None:
    """Plain exponential forgetting would need ln(0.43/0.1) = 1.5 memories for the error of 43 % to fall to 10 %."""
    course = follow(seed=3, rest=HIGH)
    print(course)
    assert 0 < course.back <= 2.0 * MEMORY


@pytest.mark.parametrize("order", [1, 2])
def test_without_forgetting_it_ends_where_the_batch_fit_ends(order: int) -> None:
    """The recursive prediction-error estimate tends to the batch one (Ljung 1999, sec. 11.4): half a standard error."""
    shape = (12.0,) if order == 1 else (0.2, 0.5)
    structure = OutputError(order, 1.0, (0.0, 6.0))
    u, y = from_rest(lag(order, 2.0, shape), before=1.0, rows=4000, sigma=0.3, seed=order)
    start = guess([0.6, *np.log(shape), 2.5, 0.0])
    first = whole_record(u[:1000], y[:1000])
    estimator = structure.estimator(structure.refit(first, start), first, memory=1e7)
    for a in range(1000, 4000, BLOCK):
        estimator.step(u[a : a + BLOCK, None], y[a : a + BLOCK], np.ones(len(u[a : a + BLOCK]), dtype=np.bool_))
    batch = structure.refit(whole_record(u, y), start)
    deviation = np.sqrt(np.diag(batch.covariance))[:-1]
    assert (np.abs(estimator.fit.theta - batch.theta)[:-1] < 0.5 * deviation).all()
    assert np.sqrt(np.diag(estimator.fit.covariance))[:-1] == pytest.approx(deviation, rel=0.2)


def noise_at_start(before: float) -> tuple[float, float]:
    """Noise of a first fit, and of the estimator that goes on from it by one row; true value 0.1.

    A plant with τ = 40 whose input stood at `before` and is 1 when the record begins.
    """
    structure = OutputError(1, 1.0, (0.0, 6.0))
    u, y = from_rest(lag(1, 2.0, (40.0,)), before=before, rows=1001, sigma=0.1, seed=1)
    record = whole_record(u[:1000], y[:1000])
    fit = structure.first_fit(record)
    assert fit is not None
    estimator = structure.estimator(fit, record, memory=1000.0)
    estimator.step(u[1000:, None], y[1000:], np.ones(1, dtype=np.bool_))
    return fit.noise, estimator.fit.noise


def test_the_noise_goes_on_from_the_fit_of_a_plant_at_rest() -> None:
    fitted, followed = noise_at_start(before=1.0)
    assert fitted == pytest.approx(0.1, rel=4.0 / math.sqrt(2.0 * 1000))
    assert followed == pytest.approx(fitted, rel=0.02)


def test_the_noise_goes_on_from_the_fit_of_a_plant_in_motion() -> None:
    fitted, followed = noise_at_start(before=-1.0)
    assert fitted == pytest.approx(0.1, rel=4.0 / math.sqrt(2.0 * 1000))
    assert followed == pytest.approx(fitted, rel=0.02)


def from_rest(
    plant: tuple[list[float], list[float]], *, before: float, rows: int, sigma: float, seed: int
) -> tuple[Array, Array]:
    """Input and output of `rows` rows of random steps, the first to 1, after a long rest at the input `before`."""
    rng = np.random.default_rng(seed)
    u = np.concatenate((np.full(400, before), [1.0, 1.0], switching(rng, rows - 2, 8)))
    y = held_response(*plant, 2.4, u) + sigma * rng.standard_normal(len(u))
    return u[400:], y[400:]


# -- nonsense -------------------------------------------------------------------------------------------------------

STRUCTURES: dict[str, Structure] = {
    "output error 1": OutputError(1, 1.0, (0.0, 4.0)),
    "output error 2": OutputError(2, 1.0, (0.0, 4.0)),
    "known dead time": OutputError(1, 1.0, (1.0, 1.0)),
    "equation error 1": EquationError(1, 1.0, (0.0, 4.0)),
    "equation error 2": EquationError(2, 1.0, (0.0, 4.0)),
}


@cache
def _started(name: str) -> Estimator:
    order = 2 if name.endswith("2") else 1
    rng = np.random.default_rng(1)
    u = switching(rng, 700, 5)
    x = held_response(*lag(order, 2.0, (8.0,) if order == 1 else (0.3, 0.5)), 1.0, u)
    record = whole_record(u[100:], (x + 0.2 * rng.standard_normal(700))[100:])
    fit = STRUCTURES[name].first_fit(record)
    assert fit is not None
    return STRUCTURES[name].estimator(fit, record, memory=200.0)


def started(name: str) -> Estimator:
    return copy.deepcopy(_started(name))


Make = Callable[[np.random.Generator, int, float], Array]
OUTPUTS: list[Make] = [
    lambda rng, m, size: np.zeros(m),
    lambda rng, m, size: np.full(m, size),
    lambda rng, m, size: size * rng.standard_normal(m),
    lambda rng, m, size: np.where(rng.random(m) < 0.1, -size, 0.0),
    lambda rng, m, size: np.full(m, np.nan),
    lambda rng, m, size: np.where(rng.random(m) < 0.3, np.inf, rng.standard_normal(m)),
]
INPUTS = OUTPUTS[:4]
blocks = st.lists(
    st.tuples(
        st.integers(0, len(INPUTS) - 1), st.integers(0, len(OUTPUTS) - 1), st.integers(1, BLOCK), st.integers(0, 4)
    ),
    min_size=1, max_size=25,
)  # fmt: skip


def feed(estimator: Estimator, plan: list[tuple[int, int, int, int]], *, size: float, seed: int) -> None:
    """(which input, which output, rows, restart when 0) for each block; also on from numbers it could not use."""
    rng = np.random.default_rng(seed)
    for which, output, m, restart in plan:
        if restart == 0:
            estimator.restart(INPUTS[which](rng, 1, size))
        estimator.step(INPUTS[which](rng, m, size)[:, None], OUTPUTS[output](rng, m, size), rng.random(m) < 0.9)


def assert_sane(structure: Structure, estimator: Estimator) -> None:
    fit = estimator.fit
    assert np.isfinite(fit.theta).all()
    assert np.isfinite(fit.covariance).all()
    assert (np.diag(fit.covariance) >= 0.0).all()
    assert 0.0 < fit.sigma < math.inf
    assert math.isfinite(structure.quantities(fit.theta, fit)["gain"])
    assert structure.settling_rows(fit) >= 0


@pytest.mark.parametrize("name", STRUCTURES)
@settings(max_examples=30, deadline=None, derandomize=True)
@given(plan=blocks, size=st.sampled_from([1e-8, 1.0, 1e3, 1e8]), seed=st.integers(0, 1000))
def test_nonsense_is_survived(name: str, plan: list[tuple[int, int, int, int]], size: float, seed: int) -> None:
    """Huge and tiny values, constants, zeros, no output at all, restarts: always finite, never below zero variance."""
    estimator = started(name)
    feed(estimator, plan, size=size, seed=seed)
    assert not estimator.invalid
    assert_sane(STRUCTURES[name], estimator)


@pytest.mark.parametrize("name", STRUCTURES)
@settings(max_examples=10, deadline=None, derandomize=True)
@given(plan=blocks, seed=st.integers(0, 1000))
def test_numbers_near_the_end_of_the_range_are_told_not_raised(
    name: str, plan: list[tuple[int, int, int, int]], seed: int
) -> None:
    estimator = started(name)
    with np.errstate(all="ignore"):
        feed(estimator, plan, size=1e300, seed=seed)
    assert_sane(STRUCTURES[name], estimator)


def many_plans() -> list[list[tuple[int, int, int, int]]]:
    drawn = np.random.default_rng(1).integers([0, 0, 1, 0], [4, 6, BLOCK + 1, 5], (150, 12, 4)).tolist()
    return [[(which, output, m, restart) for which, output, m, restart in plan] for plan in drawn]


def test_a_singular_information_matrix_is_told_not_raised() -> None:
    for seed, plan in enumerate(many_plans()):
        estimator = started("output error 1")
        feed(estimator, plan, size=1e30, seed=seed)
        assert_sane(STRUCTURES["output error 1"], estimator)


def test_a_regression_on_huge_values_has_no_negative_variance() -> None:
    for seed, plan in enumerate(many_plans()):
        estimator = started("equation error 2")
        feed(estimator, plan, size=1e12, seed=seed)
        assert_sane(STRUCTURES["equation error 2"], estimator)


@pytest.mark.parametrize("name", ["output error 1", "output error 2", "known dead time"])
def test_one_wild_output_moves_nothing(name: str) -> None:
    """A residual counts as three deviations at most (Huber 1964): one row moves θ by 3 of its own standard errors
    times its share of the information, far below one standard error."""
    estimator, clean = started(name), started(name)
    assert isinstance(estimator, FollowingEstimator)
    rng = np.random.default_rng(2)
    u, noise = switching(rng, BLOCK, 4), 0.2 * rng.standard_normal(BLOCK)
    wild = noise.copy()
    wild[5] = 1e6
    for each, output in ((estimator, wild), (clean, noise)):
        each.step(u[:, None], output, np.ones(BLOCK, dtype=np.bool_))
    deviation = np.sqrt(np.diag(clean.fit.covariance))
    moved = np.abs(estimator.fit.theta - clean.fit.theta)
    assert (moved <= deviation).all()


@pytest.mark.parametrize("name", STRUCTURES)
def test_the_same_rows_give_the_same_digits(name: str) -> None:
    ends = []
    for _ in range(2):
        estimator = started(name)
        feed(estimator, [(2, 2, BLOCK, 1)] * 10, size=1.0, seed=4)
        ends.append(estimator.fit)
    assert np.array_equal(ends[0].theta, ends[1].theta)
    assert np.array_equal(ends[0].covariance, ends[1].covariance)


@pytest.mark.parametrize("name", STRUCTURES)
def test_from_its_state_it_goes_on_to_the_last_digit(name: str) -> None:
    plan = [(2, 2, BLOCK, 1), (1, 4, 7, 1), (2, 2, BLOCK, 0)] * 4
    estimator = started(name)
    feed(estimator, plan, size=1.0, seed=4)
    restored = restored_estimator(STRUCTURES[name], copy.deepcopy(estimator.to_state()), memory=200.0)
    for each in (estimator, restored):
        feed(each, plan, size=1.0, seed=5)
    assert np.array_equal(restored.fit.theta, estimator.fit.theta)
    assert np.array_equal(restored.fit.covariance, estimator.fit.covariance)
    assert (restored.fit.sigma, restored.fit.noise) == (estimator.fit.sigma, estimator.fit.noise)


@pytest.mark.parametrize("name", ["equation error 1", "equation error 2"])
def test_a_quiet_plant_keeps_its_regression(name: str) -> None:
    """20 000 quiet rows, memory 200: the gate lets in nothing that brings no news; gain within 10 % (core figures)."""
    structure, estimator = STRUCTURES[name], started(name)
    rng = np.random.default_rng(5)
    before = structure.quantities(estimator.fit.theta, estimator.fit)["gain"]
    u, e = np.ones(20_000), 0.2 * rng.standard_normal(20_000)
    worst = 0.0
    for a in range(0, 20_000, BLOCK):
        estimator.step(u[a : a + BLOCK, None], 2.0 + e[a : a + BLOCK], np.ones(BLOCK, dtype=np.bool_))
        worst = max(worst, abs(structure.quantities(estimator.fit.theta, estimator.fit)["gain"] / before - 1.0))
    print(f"excursion {100 * worst:.2f} %")
    assert worst < 0.1
    assert_sane(structure, estimator)
