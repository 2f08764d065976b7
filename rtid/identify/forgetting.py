"""Forgetting that cannot wind up: only directions that recent data know are forgotten.

Windowed subspace forgetting after Lai & Bernstein, SIFt-RLS (2024): a quiet plant keeps what it knew.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rtid.kept import Kept

Array = NDArray[np.float64]

KNOWN = 50.0  # information over prior information: the window alone knows the direction to 1/7 of its prior deviation


class SubspaceForgetting(Kept):
    """Information R (p, p) and the window's own information W (p, p), both in units of the noise."""

    KEPT = ("information", "window", "_prior")

    def __init__(self, information: Array, window: Array, prior: Array) -> None:
        self.information = information
        self.window = window
        self._prior = prior

    def forget(self, factor: float) -> None:
        """Weaken by `factor` (λ^m for a block of m rows) what the window knows; the window itself fades wholly."""
        scale = np.outer(self._prior, self._prior)
        values, vectors = np.linalg.eigh(self.window * scale)
        known = vectors[:, values > KNOWN]
        if known.shape[1]:
            scaled = self.information * scale
            half = scaled @ known
            lost = half @ np.linalg.solve(known.T @ half, half.T)
            weakened = (scaled - (1.0 - factor) * lost) / scale
            self.information = 0.5 * (weakened + weakened.T)
        self.window = factor * self.window

    def add(self, phi: Array) -> Array:
        """Add the rows φ (m, p), in units of the noise; returns ΦᵀΦ."""
        gained = phi.T @ phi
        self.information = self.information + gained
        self.window = self.window + gained
        return gained

    def loosen(self, column: int, variance: float) -> None:
        """Let one parameter walk: its variance grows by `variance` (matrix inversion lemma)."""
        row = self.information[:, column]
        self.information = self.information - np.outer(row, row) * (variance / (1.0 + variance * row[column]))


def informed(information: Array, prior: Array) -> NDArray[np.bool_]:
    """Per parameter: (p, p) information alone knows it to 1/7 of its prior deviation, whatever the others are."""
    inverse = np.linalg.inv(information * np.outer(prior, prior) + 1e-9 * np.eye(len(prior)))
    return np.asarray(np.diag(inverse) * KNOWN < 1.0)
