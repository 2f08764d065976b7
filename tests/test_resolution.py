"""A signal's `resolution`: the noise is never taken for less than what rounding to one count makes."""

from __future__ import annotations

import math
from typing import Literal

import numpy as np
import pytest

from rtid.loop import Loop
from rtid.plants.linear import first_order, simulate
from rtid.settings import Model
from tests.support.plants import OUTPUT, blocks, prbs, told

COUNT = 0.5


@pytest.mark.parametrize("structure", ["output_error", "equation_error"])
def test_a_coarse_instrument_gives_limits_no_narrower_than_its_count(
    structure: Literal["output_error", "equation_error"],
) -> None:
    """A noise-free plant read to one count: rounding has the deviation count/√12 (Widrow & Kollár, Quantization Noise,
    2008, ch. 1). Read exactly, but with that resolution declared, the same deviation bounds the standard errors."""
    drive = prbs(1600, bit=8, seed=1)
    exact = simulate(first_order(2.0, 8 * told().period_s, offset=5.0), drive, period_s=told().period_s)
    errors = []
    for resolutions in ({}, {OUTPUT: COUNT}):
        loop = Loop(told(model=Model(structure, dead_time_s=(0.0, 2.0)), resolutions=resolutions))
        for rows in blocks(loop.settings, np.column_stack((drive, exact))):
            loop.advance(rows)
        gain = loop.snapshot("asked")["quantities"]["gain"]
        assert gain.value == pytest.approx(2.0, rel=0.02)
        errors.append(gain.std_error)
    least = COUNT / math.sqrt(12.0) / float(np.std(exact)) / math.sqrt(len(drive))
    assert errors[0] < 0.1 * least < errors[1]
