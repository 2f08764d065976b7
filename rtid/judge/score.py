"""The drift score: does what the baseline leaves unexplained still look like noise, in any direction of its parameters?

Exponentially weighted scores of several memories side by side (local approach, Basseville & Benveniste; multivariate
EWMA, Lowry et al. 1992), each with its share of the false-alarm budget. They read the innovations of a recursive
least squares that starts at the baseline with the baseline's own uncertainty and goes on learning while nothing is
flagged, so a baseline that its data hardly informed raises no alarm of its own.
Price: mean rows to a false alarm `budget_rows`; `provisional` baselines do not keep it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rtid.judge.threshold import threshold
from rtid.kept import Kept

Array = NDArray[np.float64]

MEMORIES = (50, 200, 800, 3200)  # rows
CLIP = 4.0
_LOCAL = 200.0  # rows of the local noise level
_FADE = 1e-3  # lets directions fade that have had no news for a long time
_ABSURD = 1e6  # deviations, and times the power at the baseline: beyond, a row says nothing about the plant
_SHARING = 1.5  # charts of one residual alarm together: their run lengths add up to less


class DriftScore(Kept):
    """e and φ come in units of the baseline's noise. (p, p): `covariance` of the baseline, `gamma0`, its mean φφᵀ.

    `walk`: variance a row by which the offset may walk; `budget_rows`: mean rows to a false alarm.
    """

    KEPT = (
        "_null", "_null_covariance", "_score", "_spread", "_power", "_local_noise", "_weight", "_noise",
        "_statistics",
    )  # fmt: skip

    def __init__(self, covariance: Array, gamma0: Array, *, block_rows: int, budget_rows: float, walk: float) -> None:
        p = len(gamma0)
        first = max(MEMORIES[0], 4 * block_rows)
        self._memories = np.array([float(max(first, m)) for m in MEMORIES])
        self._rates = -np.log1p(-1.0 / self._memories)
        run_length = len(MEMORIES) * budget_rows / _SHARING
        self._thresholds = np.array([threshold(p, float(g), run_length, every=block_rows) for g in self._rates])
        self._null, self._null_covariance = np.zeros(p), covariance.copy()
        self._gamma0 = gamma0
        self._walk = walk
        self._score = np.zeros((len(MEMORIES), p))
        kept = 1.0 - np.exp(-2.0 * self._rates)
        self._spread = gamma0 / kept[:, None, None]  # as after long watching: the thresholds count on a start at zero
        self._power = np.zeros((p, p))  # Σλᵏφφᵀ of the longest memory
        self._local_noise = 1.0
        self._weight = 0.0
        self._noise = np.ones(len(MEMORIES))
        self._statistics = np.zeros(len(MEMORIES))

    @property
    def ratio(self) -> float:
        """Largest statistic over its threshold: 1 is the alarm."""
        return float((self._statistics / self._thresholds).max())

    @property
    def learnt(self) -> Array:
        """What the null has learnt beyond the baseline, (p,)."""
        return self._null

    def step(self, e: Array, phi: Array, *, frozen: bool) -> None:
        """Take in the next rows, e (m,) and φ (m, p); while `frozen` the null learns nothing but the offset."""
        sane = (np.abs(e) < _ABSURD) & (phi**2 < _ABSURD * (1.0 + np.diag(self._gamma0))).all(axis=1)
        e, phi = e[sane], phi[sane]
        if len(e) == 0:
            return
        if not frozen:
            self._null_covariance[-1, -1] += self._walk * len(e)
        local = max(1.0, self._local_noise)
        try:
            root = _root(local, phi, self._null_covariance)
        except np.linalg.LinAlgError:
            self._null_covariance = _positive(self._null_covariance)
            root = _root(local, phi, self._null_covariance, slack=1e-9)
        innovation = np.asarray(np.linalg.solve(root, e - phi @ self._null), dtype=np.float64)
        scale = np.diag(root)
        self._weigh(np.clip(innovation * scale, -CLIP * scale, CLIP * scale), scale**2 - local, phi, e)
        self._learn(root, innovation, phi, frozen=frozen)
        self._statistics = self._evaluate()

    def information(self) -> tuple[Array, Array]:
        """Mean φφT of the recent rows, (p, p), and the covariance of the baseline as known by now, (p, p)."""
        return self._power / max(1.0, self._weight), self._null_covariance

    def _weigh(self, clipped: Array, extra: Array, phi: Array, e: Array) -> None:
        m = len(e)
        weights = np.exp(-np.outer(self._rates, np.arange(m - 1, -1, -1)))
        fade = np.exp(-self._rates * m)
        squares = np.clip(e, -CLIP, CLIP) ** 2
        self._weight = float(fade[-1]) * self._weight + m
        self._noise = fade * self._noise + (weights * (1.0 - np.exp(-self._rates))[:, None]) @ squares
        self._score = fade[:, None] * self._score + weights @ (phi * clipped[:, None])
        products = (phi[:, :, None] * phi[:, None, :]).reshape(m, -1)
        shape = self._spread.shape
        self._power = float(fade[-1]) * self._power + (weights[-1] @ products).reshape(shape[1:])
        spread = ((weights**2) @ (products * (1.0 + extra)[:, None])).reshape(shape)
        level = np.maximum(1.0, self._noise)[:, None, None]
        self._spread = (fade**2)[:, None, None] * self._spread + level * spread
        share = -np.expm1(-m / _LOCAL)
        self._local_noise += share * (float(squares.mean()) - self._local_noise)

    def _learn(self, root: Array, innovation: Array, phi: Array, *, frozen: bool) -> None:
        gain = np.linalg.solve(root, phi @ self._null_covariance)
        if frozen:
            gain[:, :-1] = 0.0
        self._null = self._null + gain.T @ np.clip(innovation, -3.0, 3.0)
        if not frozen:
            learnt = self._null_covariance - gain.T @ gain
            self._null_covariance = 0.5 * (learnt + learnt.T)

    def _evaluate(self) -> Array:
        kept = 1.0 - np.exp(-2.0 * self._rates)
        spread = self._spread + _FADE * self._gamma0 / kept[:, None, None] + 1e-12 * np.eye(len(self._null))
        solved = np.linalg.solve(spread, self._score[:, :, None])[:, :, 0]
        return np.asarray((self._score * solved).sum(axis=1))


def _root(local: float, phi: Array, covariance: Array, *, slack: float = 0.0) -> Array:
    """Lower triangular root of the innovations' covariance, (m, m); `slack` of its size is added to the diagonal."""
    spread = phi @ covariance @ phi.T
    spread += (local + slack * float(np.max(np.abs(spread)))) * np.eye(len(phi))
    return np.asarray(np.linalg.cholesky(spread), dtype=np.float64)


def _positive(matrix: Array) -> Array:
    """The nearest covariance: rounding must leave no direction below zero."""
    values, vectors = np.linalg.eigh(matrix)
    return np.asarray((vectors * np.maximum(values, 0.0)) @ vectors.T)
