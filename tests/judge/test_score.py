"""The drift score on innovations made to order: e is white with deviation 1, the last column of φ is the offset's."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from numpy.typing import NDArray

from rtid.judge.score import CLIP, DriftScore

Array = NDArray[np.float64]

P, M = 4, 16  # parameters, rows in a block


def chart(*, budget: float = 1e5, covariance: float = 1e-6, walk: float = 0.0, block: int = M) -> DriftScore:
    return DriftScore(covariance * np.eye(P), np.eye(P), block_rows=block, budget_rows=budget, walk=walk)


def white(rows: int, seed: int, *, noise: float = 1.0, block: int = M) -> Iterator[tuple[Array, Array]]:
    rng = np.random.default_rng(seed)
    for _ in range(rows // block):
        phi = rng.standard_normal((block, P))
        phi[:, -1] = 1.0
        yield noise * rng.standard_normal(block), phi


def state_of(score: DriftScore) -> tuple[float, bytes, bytes, bytes]:
    power, known = score.information()
    return score.ratio, score.learnt.tobytes(), power.tobytes(), known.tobytes()


def alarms_with_restart(rows: int, *, budget: float, seed: int) -> int:
    """False alarms; after each the charts begin anew."""
    score, count = chart(budget=budget), 0
    for e, phi in white(rows, seed):
        score.step(e, phi, frozen=False)
        if score.ratio >= 1.0:
            score, count = chart(budget=budget), count + 1
    return count


def test_false_alarms_keep_the_budget() -> None:
    """8 expected; more than 18 in 1 of 1000 runs, none in 1 of 3000. The charts may do better than the budget, but not
    ten times."""
    assert 1 <= alarms_with_restart(160_000, budget=20_000.0, seed=1) <= 18


def test_false_alarms_keep_a_small_budget() -> None:
    """20 expected; 36 or more in 1 of 1000 runs."""
    assert alarms_with_restart(40_000, budget=2000.0, seed=0) < 36


def test_lasting_louder_noise_makes_no_more_false_alarms() -> None:
    """Noise ×2 for 2 × 50 000 rows, 5 expected, an alarm that lasts counts anew every 6000 rows; 14 or more in 1 of
    1000 runs. Without the local noise level it would be eleven times the budget."""
    count = 0
    for seed in range(2):
        score, told = chart(budget=20_000.0), -np.inf
        for e, phi in white(4800, seed):
            score.step(e, phi, frozen=False)
        for k, (e, phi) in enumerate(white(50_000, 100 + seed, noise=2.0)):
            score.step(e, phi, frozen=score.ratio >= 1.0)
            if score.ratio >= 1.0 and M * k - told >= 6000:
                count, told = count + 1, M * k
    assert count < 14


def test_a_baseline_within_its_own_uncertainty_raises_no_alarm() -> None:
    """Ten baselines off by their standard errors of 0.3: a frozen one would be 0.09·rows in D and alarm at once."""
    for seed in range(10):
        score = chart(covariance=0.09)
        delta = 0.3 * np.random.default_rng(50 + seed).standard_normal(P)
        for e, phi in white(3200, seed):
            score.step(e + phi @ delta, phi, frozen=False)
            assert score.ratio < 1.0
        assert score.learnt == pytest.approx(delta, abs=5.0 / np.sqrt(3200.0))


@pytest.mark.parametrize("direction", range(P))
def test_a_change_in_any_direction_is_seen(direction: int) -> None:
    """A shift of 0.3 of a deviation a row: D grows by 0.09 a row against a threshold of 20 to 25."""
    score = chart()
    delta = np.zeros(P)
    delta[direction] = 0.3
    rows = 0
    for e, phi in white(1600, 3):
        score.step(e + phi @ delta, phi, frozen=True)
        rows += M
        if score.ratio >= 1.0:
            break
    assert rows <= 3 * 25.0 / 0.09


def test_a_quiet_plant_adds_nothing_to_any_direction() -> None:
    """With φ zero but for the offset nothing is learnt of the plant, and what was over the threshold only fades."""
    score = chart()
    for e, phi in white(800, 4):
        score.step(e + 0.5 * phi[:, 0], phi, frozen=False)
    assert score.ratio > 1.0
    before, (_, known_before) = score.learnt.copy(), score.information()
    ratios = [score.ratio]
    for e, _ in white(16_000, 5, noise=0.1):
        score.step(e, np.zeros((M, P)), frozen=False)
        ratios.append(score.ratio)
    assert np.all(np.diff(ratios) <= 0.0)
    assert np.array_equal(score.learnt, before)
    assert np.array_equal(score.information()[1], known_before)


def test_quiet_rows_carry_no_information() -> None:
    score = chart()
    for e, phi in white(1600, 6):
        score.step(e, phi, frozen=False)
    lively = score.information()[0]
    for e, _ in white(16_000, 7):
        score.step(e, np.eye(P)[-1] * np.ones((M, 1)), frozen=False)
    quiet = score.information()[0]
    assert np.diag(lively) == pytest.approx(np.ones(P), abs=5.0 * np.sqrt(2.0 / 1600.0))
    assert np.all(np.diag(quiet)[:-1] < 0.02)
    assert quiet[-1, -1] == pytest.approx(1.0, abs=0.005)


def test_no_rows_change_nothing() -> None:
    score = chart(walk=1e-3)
    for e, phi in white(160, 8):
        score.step(e, phi, frozen=False)
    before = state_of(score)
    score.step(np.zeros(0), np.zeros((0, P)), frozen=False)
    assert state_of(score) == before


def test_a_frozen_null_learns_only_the_offset() -> None:
    score = chart(covariance=0.1, walk=1e-3)
    for e, phi in white(160, 9):
        score.step(e, phi, frozen=False)
    before, known = score.learnt.copy(), score.information()[1].copy()
    for e, phi in white(1600, 10):
        score.step(e + 0.5, phi, frozen=True)
    assert np.array_equal(score.learnt[:-1], before[:-1])
    assert score.learnt[-1] - before[-1] > 0.3
    assert np.array_equal(score.information()[1], known)


def test_one_block_or_its_rows_one_by_one_are_the_same() -> None:
    """The null's recursion is exact in a block; the noise stays below 1, where its local level does not count."""
    whole, single = chart(covariance=0.1), chart(covariance=0.1)
    for e, phi in white(320, 11, noise=0.2):
        whole.step(e, phi, frozen=False)
    for e, phi in white(320, 11, noise=0.2):
        for i in range(M):
            single.step(e[i : i + 1], phi[i : i + 1], frozen=False)
    assert whole.learnt == pytest.approx(single.learnt, rel=1e-9)
    assert whole.information()[1] == pytest.approx(single.information()[1], rel=1e-9, abs=1e-15)
    assert whole.ratio == pytest.approx(single.ratio, rel=1e-9)


def test_one_outlier_is_worth_no_more_than_the_clip() -> None:
    """A row of 1000 deviations counts as one of `CLIP`."""
    ratios = []
    for size in (CLIP, 1000.0):
        score = chart()
        for k, (e, phi) in enumerate(white(800, 12)):
            e[0] = size if k == 40 else e[0]
            score.step(e, phi, frozen=True)
        ratios.append(score.ratio)
    assert ratios[1] == pytest.approx(ratios[0], rel=0.1)
