"""From the first row to the baseline."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest

from rtid.identify.output_error import OutputError
from rtid.judge.baseline import Baseline
from rtid.judge.learning import FIRST_FIT_ROWS, KEPT_ROWS, Learner
from rtid.plants.linear import LinearPlant, first_order, simulate
from tests.support.plants import PERIOD_S, Array, changed, prbs

PLANT = first_order(2.0, 8 * PERIOD_S, dead_time_s=2 * PERIOD_S, noise=0.2, offset=5.0)
M = 16


def learner(after_rows: int) -> Learner:
    structure = OutputError(1, PERIOD_S, (0.0, 4 * PERIOD_S))
    return Learner(structure, after_rows=after_rows, memory=600.0, tolerances={"gain": 0.1, "time_constant_1": 0.2})


def teach(
    pupil: Learner, drive: Array, *, changes: dict[int, LinearPlant] | None = None
) -> Iterator[tuple[int, Baseline | None]]:
    """Block by block: rows so far, and the baseline when it is accepted (the end)."""
    output = simulate(PLANT, drive, period_s=PERIOD_S, seed=1, changes=changes)
    for first in range(0, len(drive) - M + 1, M):
        part = slice(first, first + M)
        pupil.add(drive[part, None], output[part], np.ones(M, dtype=np.bool_), new_stretch=first == 0)
        found = pupil.advance(first + M, stamp=float(first + M))
        yield first + M, found[0] if found else None
        if found:
            return


def test_a_model_comes_first_and_the_baseline_at_the_first_block_end_after_the_least_rows() -> None:
    pupil = learner(1000)
    story = []
    for rows, baseline in teach(pupil, prbs(2000, bit=12)):
        story.append((rows, pupil.estimator is not None, baseline))
    assert [rows for rows, model, _ in story if model][0] == 208  # the first block end with FIRST_FIT_ROWS rows
    assert FIRST_FIT_ROWS == 200
    rows, _, baseline = story[-1]
    assert baseline is not None
    assert (rows, baseline.stamp) == (1008, 1008.0)


def test_while_the_input_rests_it_says_that_the_input_must_move() -> None:
    pupil = learner(400)
    assert not any(baseline for _, baseline in teach(pupil, np.ones(1200)))
    assert pupil.estimator is None
    assert pupil.progress(1200) == "learning: no model yet; the input must move"


def test_progress_says_how_long_it_takes_at_least() -> None:
    pupil = learner(1000)
    for rows, _ in teach(pupil, prbs(400, bit=12)):
        left = (1000 - rows) * PERIOD_S
    told = "learning: a first model is there, the baseline is not; about"
    assert pupil.progress(400) == f"{told} {left / 60:.0f} min more of moves"


def test_a_plant_that_moves_while_learning_loses_its_older_half_and_is_learnt_later() -> None:
    pupil, reasons, kept = learner(1200), [], []
    last: Baseline | None = None
    for _, baseline in teach(pupil, prbs(4000, bit=12), changes={600: changed(PLANT, gain=1.4)}):
        last = baseline
        reasons.append(pupil.reason)
        kept.append(pupil.rows)
    assert any(r.startswith("learning: gain moved") and r.endswith("the older half was dropped") for r in reasons)
    assert 0.4 < min(b / a for a, b in zip(kept, kept[1:], strict=False)) < 0.6
    assert last is not None
    assert last.values["gain"] == pytest.approx(1.4, rel=0.05)


def test_only_the_newest_rows_are_kept() -> None:
    pupil = learner(10**9)
    block = np.zeros(4096)
    for k in range(8):
        pupil.add(block[:, None], block, np.ones(4096, dtype=np.bool_), new_stretch=k == 0)
    assert KEPT_ROWS <= pupil.rows < KEPT_ROWS + 4096
