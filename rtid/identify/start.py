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
        ranked = sorted(_Scan(plant, part, pole).candidates(), key=lambda c: c.loss)
        found += [c.fit for c in ranked[:most]]
    return found


def liveliest_part(record: Record) -> Record:
    """The stretch of at most GRID_ROWS rows without a gap in which the inputs move most."""
    ends = (*record.starts[1:], len(record))
    windows = [
        (first, min(first + GRID_ROWS, end))
        for start, end in zip(record.starts, ends, strict=True)
        for first in range(start, end, GRID_ROWS)
    ]
    usual = np.maximum(record.inputs.var(axis=0), 1e-300)

    def motion(window: tuple[int, int]) -> float:
        part = record.inputs[window[0] : window[1]]
        return float((part.var(axis=0) / usual).sum()) * len(part)

    return record.part(*max(windows, key=motion))


class _Scan:
    """One record, whitened by 1 - pole·q^-1, against every shape of the grid."""

    def __init__(self, plant: Plant, record: Record, pole: float) -> None:
        self._plant = plant
        self._pole = pole
        self._centre = record.inputs.mean(axis=0)
        self._drives = (record.inputs - self._centre).T
        self._rows = len(record)
        ok = record.ok & np.isfinite(record.output)
        ok[: plant.depth + 3] = False
        self._good = ok & np.concatenate(([False], ok[:-1]))
        self._output = self._whiten(np.where(np.isfinite(record.output), record.output, 0.0))
        least, most = (round(v / plant.period) for v in plant.dead_time)
        self._delays = list(range(int(least), max(int(most), int(least)) + 1))

    def candidates(self) -> list[Candidate]:
        if self._good.sum() < 20:
            return []
        found = [self._candidate(shape) for shape in _shapes(self._plant, self._rows)]
        return [candidate for candidate in found if candidate is not None]

    def _candidate(self, shape: tuple[float, ...]) -> Candidate | None:
        """The best dead times for one shape, with the gains and the offset that least squares gives them."""
        plant = self._plant
        unit = held_map(plant.order, np.array([0.0, *shape, 0.0]), sign=1.0, period=plant.period)
        impulse = np.concatenate(([1.0], np.zeros(self._rows - 1)))
        always = [np.full(len(self._output), 1.0 - self._pole), self._whiten(all_pole(impulse, unit.f, (0.0, 0.0))[0])]
        responses = [self._responses(drive, unit.f, unit.b) for drive in self._drives]
        chosen = self._choose(responses, always)
        columns = np.column_stack([r[c] for r, c in zip(responses, chosen, strict=True)] + always)
        solution = np.linalg.lstsq(columns, self._output, rcond=1e-9)[0]
        gains, offset = solution[: plant.inputs], float(solution[plant.inputs])
        loss = float(((self._output - columns @ solution) ** 2).sum())
        if gains[0] == 0.0 or not math.isfinite(loss):
            return None
        delays = [self._delays[c] * plant.period for c in chosen]
        later = [v for pair in zip(gains[1:].tolist(), delays[1:], strict=True) for v in pair]
        theta = np.array([math.log(abs(gains[0])), *shape, *later, delays[0], offset])
        return Candidate(loss, self._fit(theta, float(gains[0])))

    def _choose(self, responses: list[Array], always: list[Array]) -> list[int]:
        """Which dead time of each input: one after the other, the others held, twice where there are several."""
        chosen = [0] * len(responses)
        for _ in range(1 if len(responses) == 1 else 2):
            for i, shifted in enumerate(responses):
                others = [r[chosen[j]] for j, r in enumerate(responses) if j != i]
                chosen[i] = int(np.argmax(_explained(shifted, self._output, [*always, *others])))
        return chosen

    def _responses(self, drive: Array, f: Array, b: Array) -> Array:
        """Model output for gain 1 at every dead time, from the steady state of the first input; (delays, good rows)."""
        before = self._delays[-1]
        padded = np.concatenate((np.full(before + 3, drive[0]), drive))
        forcing = b[0] * padded[2:-1] + b[1] * padded[1:-2] + b[2] * padded[:-3]
        x = all_pole(forcing, f, (drive[0], drive[0]))[0]
        return self._whiten(np.array([x[before - d : before - d + self._rows] for d in self._delays]))

    def _whiten(self, values: Array) -> Array:
        if self._pole:
            values = np.concatenate((values[..., :1], values[..., 1:] - self._pole * values[..., :-1]), axis=-1)
        return values[..., self._good]

    def _fit(self, theta: Array, gain: float) -> Fit:
        p = len(theta)
        return Fit(
            theta=self._plant.within(theta), covariance=np.zeros((p, p)), sigma=1.0, noise=1.0, ar=np.zeros(0), rows=0,
            centre=self._centre, sign=math.copysign(1.0, gain),
        )  # fmt: skip


def _shapes(plant: Plant, rows: int) -> Iterator[tuple[float, ...]]:
    """Logarithms of time constants from one period to a fifth of the record, four to the decade."""
    longest = max(rows / 5.0, 4.0)
    count = max(3, math.ceil(4.0 * math.log10(longest)))
    for tau in np.geomspace(1.0, longest, count) * plant.period:
        if plant.order == 1:
            yield (math.log(tau),)
        else:
            yield from ((math.log(1.0 / tau), math.log(z)) for z in _DAMPINGS)


def _explained(x: Array, y: Array, basis: list[Array]) -> Array:
    """How much of y (m,) each row of x (c, m) explains beyond the basis, (c,)."""
    q, _ = np.linalg.qr(np.column_stack(basis))
    left = y - q @ (q.T @ y)
    total = (x**2).sum(axis=1)
    power = total - ((x @ q) ** 2).sum(axis=1)
    usable = power > 1e-9 * np.maximum(total, 1e-300)
    return np.where(usable, (x @ left) ** 2 / np.where(usable, power, 1.0), 0.0)
