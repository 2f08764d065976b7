"""Short all-pole recursions on plain floats: faster than numpy for one or two poles."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
State = tuple[float, float]


def all_pole(drive: Array, f: Array, state: State) -> tuple[Array, State]:
    """x(t) = drive(t) - f1 x(t-1) - f2 x(t-2).

    drive: (m,); f: (2,); state: (x(-1), x(-2)). Returns x, shape (m,), and the state after it.
    """
    f1, f2 = float(f[0]), float(f[1])
    x1, x2 = state
    out: list[float] = []
    append = out.append
    if f2 == 0.0:
        for value in drive.tolist():
            x1, x2 = value - f1 * x1, x1
            append(x1)
    else:
        for value in drive.tolist():
            x1, x2 = value - f1 * x1 - f2 * x2, x1
            append(x1)
    return np.array(out), (x1, x2)
