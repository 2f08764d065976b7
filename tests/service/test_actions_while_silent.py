"""Actions on a loop whose readings have stopped, or have not come yet."""

from __future__ import annotations

import numpy as np
import pytest

from rtid.actions import Action, ActionRefused
from rtid.loop import Loop
from rtid.rows import Rows
from tests.support.plants import told

NOW = 1_800_000_000.0
HOUR = 3600.0
HOLD = Action("hold", by="Kim", for_s=0.5 * HOUR, reason="maintenance")


@pytest.fixture
def loop() -> Loop:
    """After one block of a device whose clock began a minute ago."""
    loop = Loop(told())
    loop.advance(Rows(first=0, time_s=60.0, values=np.zeros((16, 2)), stamp=NOW))
    return loop


def test_a_hold_placed_during_a_silence_lasts_as_long_as_it_was_told(loop: Loop) -> None:
    loop.silence(8 * HOUR, NOW + 8 * HOUR)
    loop.act(HOLD, NOW + 8 * HOUR, silent_s=8 * HOUR)
    by, until = loop.hold or ("", 0.0)
    assert (by, until) == ("Kim", pytest.approx(NOW + 8.5 * HOUR, abs=1.0))
    loop.silence(8.4 * HOUR, NOW + 8.4 * HOUR)
    assert loop.hold is not None
    report = loop.silence(8.6 * HOUR, NOW + 8.6 * HOUR)
    assert loop.hold is None
    assert report is not None
    assert "the hold has ended by itself" in [transition.text for transition in report.transitions]


def test_before_the_first_reading_only_a_remark_is_taken() -> None:
    loop = Loop(told())
    with pytest.raises(ActionRefused, match="no reading has come yet"):
        loop.act(HOLD, NOW, silent_s=5.0)
    report = loop.act(Action("note", by="Kim", text="cable is laid"), NOW, silent_s=5.0)
    assert [(t.action, t.by, t.text) for t in report.transitions] == [("note", "Kim", "cable is laid")]
    assert (report.state, loop.report) == ("waiting", None)


def test_after_an_early_remark_the_first_block_is_published(loop: Loop) -> None:
    early = Loop(told())
    early.act(Action("note", by="Kim", text="cable is laid"), NOW)
    assert early.advance(Rows(first=0, time_s=60.0, values=np.zeros((16, 2)), stamp=NOW)) == loop.report
