"""The upper tail of χ² against scipy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import chi2  # type: ignore[import-untyped]

from rtid.model.chi_square import upper_tail


@pytest.mark.parametrize("freedom", [1, 2, 3, 5, 20, 21, 100])
def test_upper_tail_agrees_with_scipy(freedom: int) -> None:
    x = np.concatenate((np.geomspace(1e-6, 1.0, 30), np.linspace(0.5, 4.0, 60) * freedom, [freedom + 1.999, 700.0]))
    ours = [upper_tail(float(v), freedom) for v in x]
    assert ours == pytest.approx(chi2.sf(x, freedom).tolist(), rel=1e-10, abs=1e-14)


@pytest.mark.parametrize("x", [0.0, -1.0, -1e300])
def test_nothing_is_below_zero(x: float) -> None:
    assert upper_tail(x, 4) == 1.0


@pytest.mark.parametrize("x", [1e4, 1e6, 1e300])
def test_far_out_it_is_zero_and_never_negative(x: float) -> None:
    assert 0.0 <= upper_tail(x, 20) < 1e-300
