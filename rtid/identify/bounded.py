"""A Gauss-Newton step inside a box: what a bound holds back, the other parameters must not make up for wrongly."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def bounded_step(normal: Array, gradient: Array, low: Array, high: Array) -> Array:
    """The step δ, (p,), that solves normal·δ = gradient with low ≤ δ ≤ high.

    Parameters that leave the box are put on its edge and the others solved for again, until none leaves it
    (active set; Nocedal & Wright, Numerical Optimization, 2nd ed., sec. 16.5).
    """
    held = np.zeros(len(gradient), dtype=np.bool_)
    step = np.asarray(np.linalg.solve(normal, gradient), dtype=np.float64)
    for _ in range(len(gradient)):
        outside = ~held & ((step < low) | (step > high))
        if not outside.any():
            break
        held |= outside
        step = np.where(held, np.minimum(np.maximum(step, low), high), step)
        free = ~held
        rest = gradient[free] - normal[np.ix_(free, held)] @ step[held]
        step[free] = np.linalg.solve(normal[np.ix_(free, free)], rest)
    return step
