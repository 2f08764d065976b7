"""Plants drawn at random with everything that a real record has: offsets, noise, gaps, motion before the first row."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rtid.identify.delta import is_linear, quantity_jacobian
from rtid.identify.record import Record
from rtid.identify.structure import Fit, Structure
from tests.identify.synthetic import coloured, held_response, lag, switching

DEAD_TIME = (0.0, 8.0)
SHAPE_QUANTITIES = {1: ("time_constant_1",), 2: ("natural_frequency", "damping_ratio")}


@dataclass(frozen=True)
class Drawn:
    record: Record
    truth: dict[str, float]


def draw(order: int, seed: int, *, rows: int) -> Drawn:
    """ζ 0.1 … 2, 10 … 30 dB, white or coloured noise, dead time 0 … 6, one gap, some rows without output."""
    rng = np.random.default_rng([seed, order])
    shape, slowest = _shape(rng, order)
    gain, dead_time = float(rng.choice([-1.0, 1.0]) * np.exp(rng.uniform(-2.0, 2.0))), float(rng.uniform(0.0, 6.0))
    before = int(10 * slowest) + 20
    hold = int(rng.integers(1, 2 + int(slowest / 2)))
    u = switching(rng, rows + before, hold) + 3.0 * rng.standard_normal()
    x = held_response(*lag(order, gain, shape), dead_time, u)[before:]
    offset = float(5.0 * x.std() * rng.standard_normal())
    noise = x.std() * 10.0 ** (-rng.uniform(10.0, 30.0) / 20.0)
    y = x + offset + noise * coloured(rng, rows, float(rng.choice([0.0, 0.6])))
    y[rng.integers(0, rows, rows // 100)] = np.nan
    cut = int(rng.integers(rows // 3, 2 * rows // 3))
    kept = np.r_[0:cut, cut + 40 : rows]
    record = Record(u[before:][kept][:, None], y[kept], np.ones(len(kept), dtype=np.bool_), (0, cut))
    shown = dict(zip(SHAPE_QUANTITIES[order], shape, strict=True))
    return Drawn(record, {"gain": gain, **shown, "dead_time": dead_time, "offset": offset})


def _shape(rng: np.random.Generator, order: int) -> tuple[tuple[float, ...], float]:
    if order == 1:
        constant = float(np.exp(rng.uniform(math.log(3.0), math.log(30.0))))
        return (constant,), constant
    w = 1.0 / float(np.exp(rng.uniform(math.log(2.0), math.log(12.0))))
    z = float(np.exp(rng.uniform(math.log(0.1), math.log(2.0))))
    return (w, z), (1.0 / z if z < 1.0 else z + math.sqrt(z * z - 1.0)) / w


def published_z(structure: Structure, fit: Fit, truth: dict[str, float]) -> dict[str, float]:
    """Error over reported standard error of every quantity that is well enough known to be published.

    That is: ln|value| to 0.15, the dead time to max(period, 0.15 (dead time + largest time constant)).
    """
    values, jacobian = quantity_jacobian(structure, fit)
    rows = {name: jacobian[i] for i, name in enumerate(values)}
    z = {}
    for name, true in truth.items():
        error = math.sqrt(rows[name] @ fit.covariance @ rows[name])
        limit = {"offset": math.inf, "dead_time": max(1.0, 0.15 * (values["dead_time"] + structure.slowest(fit)))}
        if error <= limit.get(name, 0.15):
            miss = values[name] - true if is_linear(name) else math.log(values[name] / true)
            z[name] = miss / error
    return z
