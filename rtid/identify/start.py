"""Where a fit begins: a grid over the plant's shape and every dead time, gain and offset solved for exactly in each."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtid.identify.held import held_map
from rtid.identify.record import Record
from rtid.identify.recursion import all_pole
from rtid.identify.simulated import Plant
from rtid.identify.structure import Fit

Array = NDArray[np.float64]

GRID_ROWS = 4000
_PREWHITENING = (0.0, 0.9)
_DAMPINGS = (0.3, 1.5)


@dataclass(frozen=True, slots=True)
class Candidate:
    loss: float
    fit: Fit


def candidates(plant: Plant, record: Record, most: int = 2) -> list[Fit]:
    """The best starting points, best first: `most` for white noise and `most` for strongly coloured noise."""
    part = liveliest_part(record)
    found: list[Fit] = []
    for pole in _PREWHITENING:
        ranked = sorted(_scan(plant, part, pole), key=lambda c: c.loss)
        found += [c.fit for c in ranked[:most]]
    return found


def liveliest_part(record: Record) -> Record:
    """The stretch of at most GRID_ROWS rows without a gap in which the input moves most."""
    ends = (*record.starts[1:], len(record))
    windows = [
        (first, min(first + GRID_ROWS, end))
        for start, end in zip(record.starts, ends, strict=True)
        for first in range(start, end, GRID_ROWS)
    ]
    best = max(windows, key=lambda w: float(np.var(record.inputs[w[0] : w[1], 0])) * (w[1] - w[0]))
    return record.part(*best)


def _scan(plant: Plant, record: Record, pole: float) -> Iterator[Candidate]:
    """Every shape of the grid with its best dead time; `pole` whitens by 1 - pole·q^-1 first."""
    centre = float(np.mean(record.inputs[:, 0]))
    drive = record.inputs[:, 0] - centre
    ok = record.ok & np.isfinite(record.output)
    ok[: plant.depth + 3] = False
    if ok.sum() < 20:
        return
    output = np.where(np.isfinite(record.output), record.output, 0.0)
    delays = _delays(plant)
    for shape in _shapes(plant, len(record)):
        unit = held_map(plant.order, np.array([0.0, *shape, 0.0]), sign=1.0, period=plant.period)
        impulse = np.concatenate(([1.0], np.zeros(len(drive) - 1)))
        free = all_pole(impulse, unit.f, (0.0, 0.0))[0]
        x = _unit_response(drive, unit.f, unit.b, max(delays))
        shifted = np.array([x[max(delays) - d : max(delays) - d + len(drive)] for d in delays])
        good = ok & np.concatenate(([False], ok[:-1]))
        losses, gains, offsets = _solve(*(_whiten(part, pole)[..., good] for part in (shifted, output, free)))
        best = int(np.argmin(losses))
        if gains[best] == 0.0 or not np.isfinite(losses[best]):
            continue
        offset = offsets[best] / (1.0 - pole)
        theta = np.array([math.log(abs(gains[best])), *shape, delays[best] * plant.period, offset])
        yield Candidate(float(losses[best]), _start_fit(plant, theta, gains[best], centre))


def _start_fit(plant: Plant, theta: Array, gain: float, centre: float) -> Fit:
    p = len(theta)
    return Fit(
        theta=plant.within(theta), covariance=np.zeros((p, p)), sigma=1.0, noise=1.0, ar=np.zeros(0), rows=0,
        centre=np.array([centre]), sign=math.copysign(1.0, gain),
    )  # fmt: skip


def _delays(plant: Plant) -> list[int]:
    least, most = (round(v / plant.period) for v in plant.dead_time)
    return list(range(int(least), max(int(most), int(least)) + 1))


def _shapes(plant: Plant, rows: int) -> Iterator[tuple[float, ...]]:
    """Logarithms of time constants from one period to a fifth of the record, four to the decade."""
    longest = max(rows / 5.0, 4.0)
    count = max(3, math.ceil(4.0 * math.log10(longest)))
    for tau in np.geomspace(1.0, longest, count) * plant.period:
        if plant.order == 1:
            yield (math.log(tau),)
        else:
            yield from ((math.log(1.0 / tau), math.log(z)) for z in _DAMPINGS)


def _unit_response(drive: Array, f: Array, b: Array, before: int) -> Array:
    """Model output for gain 1 and dead time 0, preceded by `before` rows of the steady state it starts from."""
    padded = np.concatenate((np.full(before + 3, drive[0]), drive))
    forcing = b[0] * padded[2:-1] + b[1] * padded[1:-2] + b[2] * padded[:-3]
    return all_pole(forcing, f, (drive[0], drive[0]))[0]


def _whiten(values: Array, pole: float) -> Array:
    if pole == 0.0:
        return values
    return np.concatenate((values[..., :1], values[..., 1:] - pole * values[..., :-1]), axis=-1)


def _solve(x: Array, y: Array, free: Array) -> tuple[Array, Array, Array]:
    """Least squares of y (m,) on each row of x (c, m), a constant and the free response: loss, gain, offset, (c,)."""
    basis, _ = np.linalg.qr(np.column_stack((np.ones(len(y)), free)))
    y_left = y - basis @ (basis.T @ y)
    x_parts = x @ basis
    power = (x**2).sum(axis=1) - (x_parts**2).sum(axis=1)
    cross = x @ y_left
    usable = power > 1e-9 * np.maximum((x**2).sum(axis=1), 1e-300)
    gains = np.where(usable, cross / np.where(usable, power, 1.0), 0.0)
    losses = float(y_left @ y_left) - gains * cross
    offsets = y.mean() - gains * x.mean(axis=1)
    return losses, gains, offsets
