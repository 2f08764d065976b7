"""The trend of one loop as CSV: a row at every block end that is due."""

from __future__ import annotations

import math
import os
from collections.abc import Sequence
from pathlib import Path
from types import TracebackType
from typing import Self

from rtid.publish.files import cannot_write, create
from rtid.report import Quantity, Report

FIRST_COLUMNS = ("time_s", "state", "health", "drift_ratio", "worst_quantity")
LAST_COLUMN = "detectable_gain_pct"
UNKNOWN = Quantity(None, None, None, None, "")


class TrendFile:
    """Columns: `time_s,state,health,drift_ratio,worst_quantity`, per quantity `NAME,NAME_low,NAME_high`, then
    `detectable_gain_pct`. A cell is empty where nothing is known; numbers read back as the same floats.

    Raises CannotCreate when the file cannot be made, InputOutputError when the disk refuses a row.
    """

    def __init__(self, path: str | os.PathLike[str], quantity_names: Sequence[str]) -> None:
        self._path = Path(path)
        self._names = tuple(quantity_names)
        self._file = create(self._path)
        self._write([*FIRST_COLUMNS, *self._quantity_columns(), LAST_COLUMN])

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.close()

    def row(self, report: Report) -> None:
        """Write the report when it is due."""
        if not report.due:
            return
        drift = report.drift
        cells = [_number(report.time_s), report.state, report.health, _number(drift.ratio), drift.worst_quantity or ""]
        for name in self._names:
            quantity = report.quantities.get(name, UNKNOWN)
            cells += map(_number, (quantity.value, quantity.low, quantity.high))
        self._write([*cells, _number(drift.detectable_gain_pct)])

    def close(self) -> None:
        try:
            self._file.close()
        except OSError as error:
            raise cannot_write(self._path, error) from None

    def _quantity_columns(self) -> list[str]:
        return [name + end for name in self._names for end in ("", "_low", "_high")]

    def _write(self, cells: Sequence[str]) -> None:
        try:
            self._file.write(",".join(cells) + "\n")
        except OSError as error:
            raise cannot_write(self._path, error) from None


def _number(value: float | None) -> str:
    """The shortest text that reads back as the same float; empty for what is unknown."""
    return "" if value is None or not math.isfinite(value) else repr(float(value))
