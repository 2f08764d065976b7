"""The block recursive least-squares kernel: a stack of square-root information arrays.

Each of c candidate models keeps the triangle of [R z; 0 ρ] with R θ = z and ρ² the weighted residual sum of squares
(Bierman, Factorization Methods for Discrete Sequential Estimation, 1977, ch. 4). A block of rows is folded in by one
stacked orthogonal triangularisation, so it costs one numpy call however many candidates there are.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rtid.kept import Kept

Array = NDArray[np.float64]


class LeastSquaresStack(Kept):
    """c models with p parameters each. `deviation`: (p,) prior standard deviations around zero."""

    KEPT = ("triangle", "weight")

    def __init__(self, candidates: int, deviation: Array) -> None:
        self.p = len(deviation)
        self.triangle = np.zeros((candidates, self.p + 1, self.p + 1))
        self.triangle[:, range(self.p), range(self.p)] = 1.0 / deviation
        self.weight = 0.0  # sum of the rows' present weights

    def fold(self, regressors: Array, output: Array, *, factor: float = 1.0) -> None:
        """Weaken what is known by `factor` (λ^m), then add m rows. regressors: (c, m, p); output: (m,)."""
        rows = np.concatenate(
            (regressors, np.broadcast_to(output[None, :, None], (*regressors.shape[:2], 1))), axis=2
        )
        stacked = np.concatenate((np.sqrt(factor) * self.triangle, rows), axis=1)
        self.triangle = np.asarray(np.linalg.qr(stacked, mode="r"))
        self.weight = factor * self.weight + regressors.shape[1]

    def solve(self) -> Array:
        """θ of every candidate, (c, p)."""
        corner, right = self.triangle[:, : self.p, : self.p], self.triangle[:, : self.p, self.p :]
        return np.asarray(np.linalg.solve(corner, right)[..., 0])

    def residual_sum(self) -> Array:
        """Weighted residual sum of squares of every candidate, (c,)."""
        return np.asarray(self.triangle[:, self.p, self.p] ** 2)

    def inverse(self, candidate: int) -> Array:
        """P = (ΣλᵏφφT)^-1 of one candidate, (p, p)."""
        root = np.linalg.inv(self.triangle[candidate, : self.p, : self.p])
        return np.asarray(root @ root.T)
