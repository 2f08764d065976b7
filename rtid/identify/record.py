"""The rows that a loop keeps while it learns: the newest ones, in stretches that gaps separate."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Record:
    """inputs: (N, n); output: (N,); ok: (N,) rows that may be scored; starts: first row of each stretch, from 0."""

    inputs: Array
    output: Array
    ok: Mask
    starts: tuple[int, ...]

    def __len__(self) -> int:
        return len(self.output)

    def part(self, first: int, last: int) -> Record:
        """Rows first … last-1 as a record of their own."""
        starts = (0, *(s - first for s in self.starts if first < s < last))
        return Record(self.inputs[first:last], self.output[first:last], self.ok[first:last], starts)

    def halves(self) -> tuple[Record, Record]:
        middle = len(self) // 2
        return self.part(0, middle), self.part(middle, len(self))


def blank_record(inputs: Array) -> Record:
    """One row that counts for nothing, at the inputs (n,): what is made on it waits for its state."""
    return Record(inputs[None, :], np.zeros(1), np.zeros(1, dtype=np.bool_), (0,))


class RecordKeeper(Kept):
    """Collects blocks of rows, the newest `limit` at most."""

    KEPT = ("_blocks", "rows")

    def __init__(self, limit: int) -> None:
        self._limit = limit
        self._blocks: list[tuple[Array, Array, Mask, bool]] = []
        self.rows = 0

    def append(self, inputs: Array, output: Array, ok: Mask, *, new_stretch: bool) -> None:
        self._blocks.append((inputs, output, ok, new_stretch))
        self.rows += len(output)
        while self.rows - len(self._blocks[0][1]) >= self._limit:
            self._drop_first()

    def drop_older_half(self) -> None:
        keep = self.rows // 2
        while self.rows > keep and len(self._blocks) > 1:
            self._drop_first()

    def record(self) -> Record:
        lengths = [len(block[1]) for block in self._blocks]
        firsts = np.concatenate(([0], np.cumsum(lengths)[:-1])).tolist()
        starts = [int(first) for first, block in zip(firsts, self._blocks, strict=True) if block[3] and first > 0]
        return Record(
            np.concatenate([block[0] for block in self._blocks]),
            np.concatenate([block[1] for block in self._blocks]),
            np.concatenate([block[2] for block in self._blocks]),
            (0, *starts),
        )

    def _drop_first(self) -> None:
        self.rows -= len(self._blocks.pop(0)[1])
