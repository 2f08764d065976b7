"""A small loop, readings for it, and the rows that its grid makes."""

from __future__ import annotations

from collections.abc import Iterable

from rtid import settings
from rtid.intake.grid import Grid
from rtid.intake.reading import Reading
from rtid.rows import Rows

Plain = tuple[int, float, list[list[str]], float, bool, float]
IGNORED_STAMP = 0.0


def told(*, period_s: float = 1.0, inputs: tuple[str, ...] = ("a.u",), gate: str | None = None) -> settings.Loop:
    """A loop with output `b.y`. A period of 1 s has blocks of 4, of 2.5 s blocks of 2, of 3 s blocks of 1."""
    conditions = (settings.Condition(signal=gate, above=0.5),) if gate else ()
    return settings.Loop(
        name="loop",
        inputs=inputs,
        output="b.y",
        period_s=period_s,
        model=settings.Model(),
        memory_s=1000.0,
        stale_after_s=5.0,
        baseline=settings.Baseline(),
        active_when=settings.Gate(conditions) if gate else None,
    )


def both(time: float, *, u: float = 0.0, y: float = 0.0) -> Reading:
    """Input and output in one message."""
    return Reading("a", time, {"a.u": u, "b.y": y})


def only_input(time: float, u: float) -> Reading:
    return Reading("a", time, {"a.u": u})


def only_output(time: float, y: float) -> Reading:
    return Reading("b", time, {"b.y": y})


def feed(grid: Grid, readings: Iterable[Reading], stamp: float = IGNORED_STAMP) -> list[Rows]:
    return [rows for reading in readings for rows in grid.feed(reading, stamp)]


def started(loop: settings.Loop, *, at: float = 0.0, ticks: int = 12) -> Grid:
    """A grid past its decision about oversampling: `ticks` readings, one per tick, u = y = k, its rows flushed."""
    grid = Grid(loop)
    feed(grid, (both(at + k * loop.period_s, u=float(k), y=float(k)) for k in range(ticks)))
    grid.flush(IGNORED_STAMP)
    return grid


def plain(blocks: Iterable[Rows]) -> list[Plain]:
    """All but the stamps, to be compared digit for digit (repr: NaN equals NaN)."""
    return [
        (b.first, b.time_s, [[repr(v) for v in row] for row in b.values.tolist()], b.gap_s, b.restart, b.output_shift_s)
        for b in blocks
    ]


def by_tick(blocks: Iterable[Rows]) -> dict[int, list[float]]:
    """Row values by tick number."""
    return {block.first + i: row for block in blocks for i, row in enumerate(block.values.tolist())}
