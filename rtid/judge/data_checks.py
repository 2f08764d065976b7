"""Checks of the data themselves, before anything is learnt or judged from them."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from rtid.judge.alarms import Finding
from rtid.settings import Range

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_QUIET = Finding(False)


class DataChecks:
    """`columns`: signals in column order; `ranges`: what each instrument can truly show; `limits`: actuators' ends."""

    def __init__(self, columns: tuple[str, ...], *, ranges: Mapping[str, Range], limits: Mapping[str, Range]) -> None:
        self._ranges = [(i, name, ranges[name]) for i, name in enumerate(columns) if name in ranges]
        self._limits = [(i, name, limits[name]) for i, name in enumerate(columns) if name in limits]

    def credible(self, values: Array) -> Mask:
        """Rows (m,) in which every signal shows what its instrument can truly show."""
        good = np.ones(len(values), dtype=np.bool_)
        for i, _, (low, high) in self._ranges:
            column = values[:, i]
            good &= ~((column < low) | (column > high))
        return good

    def findings(self, values: Array) -> list[tuple[str, str, Finding]]:
        """Per watched signal: alarm name, signal and what was found in these rows."""
        out = [("out_of_range", name, _outside(name, values[:, i], ends)) for i, name, ends in self._ranges]
        return out + [("saturated", name, _at_end(name, values[:, i], ends)) for i, name, ends in self._limits]


def _outside(name: str, column: Array, ends: Range) -> Finding:
    bad = column[(column < ends[0]) | (column > ends[1])]
    if len(bad) == 0:
        return _QUIET
    text = (
        f"{name} reads {bad[-1]:.6g}, outside {ends[0]:g} … {ends[1]:g} that the instrument can truly show. "
        "Look first at its wiring and supply. These readings are not used."
    )
    return Finding(True, text)


def _at_end(name: str, column: Array, ends: Range) -> Finding:
    """Saturated when the whole block stands at an end of the actuator's travel."""
    if bool(np.all(column >= ends[1])):
        end = ends[1]
    elif bool(np.all(column <= ends[0])):
        end = ends[0]
    else:
        return _QUIET
    return Finding(True, f"{name} stands at its limit {end:g}: the loop has no authority there and teaches nothing.")
