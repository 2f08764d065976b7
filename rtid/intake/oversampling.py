"""Signals faster than the grid: which ones they are, and between which of their readings the averaging windows begin.

An output is averaged over the readings nearest to the tick, [t_k - period/2, t_k + period/2); an input over the hold
in which it is applied, [t_k, t_k+1). A window edge that falls on a reading would throw it to one side or the other with
the least jitter, so the edge is moved to the middle between two readings: at most 7/8 of a sub-sample earlier or 1/8
later. Readings at the edge, or up to 3/8 of a sub-sample before it, count as being in the window that begins there.
"""

from __future__ import annotations

import math

SPAN_READINGS = 9
FAST_SPAN = 4.5  # periods; eight intervals at two per period last 4, and there is half a period of room
AT_THE_EDGE = -0.375  # sub-samples; below zero because readings meant for the edge come early half of the time
LEAST_SPAN = 1e-6  # periods; readings closer together have no sub-sample that their times could tell


def window_shift(positions: list[float], begin: float) -> float | None:
    """How far to move a window edge at `begin` (ticks from the tick), in periods; None: the signal is not fast.

    `positions` are those of its readings, in ticks, ascending. It is fast when the last nine span less than 4.5
    periods (two or more per period); the last ones, because a port may open with a burst or with a pause.
    """
    recent = positions[-SPAN_READINGS:]
    if len(recent) < SPAN_READINGS:
        return None
    span = recent[-1] - recent[0]
    if span >= FAST_SPAN:
        return None
    return _to_the_middle([position - begin for position in recent], span) if span > LEAST_SPAN else 0.0


def _to_the_middle(offsets: list[float], span: float) -> float:
    """From the edge to the middle between the reading at or after it and the one before, by their mean phase."""
    per_period = round((SPAN_READINGS - 1) / span)
    angles = [math.tau * per_period * math.fmod(offset, 1.0) for offset in offsets]
    turn = math.atan2(sum(map(math.sin, angles)), sum(map(math.cos, angles))) / math.tau
    phase = turn if turn >= AT_THE_EDGE else turn + 1.0  # of the reading at the edge, in sub-samples
    return (phase - 0.5) / per_period
