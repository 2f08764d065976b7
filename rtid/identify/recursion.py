"""Short all-pole recursions: on plain floats, which beats numpy for one or two poles, and in blocks for long series."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
State = tuple[float, float]

_BLOCK = 32
_LONG = 1024  # rows from which blocks are faster
_LAGS = np.arange(_BLOCK)[:, None] - np.arange(_BLOCK)[None, :] + _BLOCK - 1


def all_pole(drive: Array, f: Array, state: State) -> tuple[Array, State]:
    """x(t) = drive(t) - f1 x(t-1) - f2 x(t-2).

    drive: (m,); f: (2,); state: (x(-1), x(-2)). Returns x, shape (m,), and the state after it.
    """
    if len(drive) < _LONG:
        return _row_by_row(drive, f, state)
    whole = len(drive) // _BLOCK * _BLOCK
    x, state = _in_blocks(drive[:whole].reshape(-1, _BLOCK), f, state)
    rest, state = _row_by_row(drive[whole:], f, state)
    return np.concatenate((x, rest)), state


def _row_by_row(drive: Array, f: Array, state: State) -> tuple[Array, State]:
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


def _in_blocks(drive: Array, f: Array, state: State) -> tuple[Array, State]:
    """drive: (blocks, _BLOCK). Each block from rest by one product, then what its start adds."""
    nothing = np.zeros(_BLOCK)
    impulse = _row_by_row(np.eye(1, _BLOCK)[0], f, (0.0, 0.0))[0]
    first, second = _row_by_row(nothing, f, (1.0, 0.0))[0], _row_by_row(nothing, f, (0.0, 1.0))[0]
    response = np.concatenate((np.zeros(_BLOCK - 1), impulse))[_LAGS]
    x = drive @ response.T
    starts = _starts(x[:, -2:].tolist(), first, second, state)
    x += starts[:-1] @ np.stack((first, second))
    return x.ravel(), (float(starts[-1, 0]), float(starts[-1, 1]))


def _starts(ends: list[list[float]], first: Array, second: Array, state: State) -> Array:
    """State before every block and after the last, (blocks + 1, 2)."""
    a1, a2, b1, b2 = float(first[-1]), float(second[-1]), float(first[-2]), float(second[-2])
    x1, x2 = state
    out = [(x1, x2)]
    for before_last, last in ends:
        x1, x2 = last + a1 * x1 + a2 * x2, before_last + b1 * x1 + b2 * x2
        out.append((x1, x2))
    return np.array(out)
