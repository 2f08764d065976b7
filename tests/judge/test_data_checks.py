"""Checks of the data before anything is learnt from them."""

from __future__ import annotations

import numpy as np
import pytest

from rtid.judge.data_checks import DataChecks

COLUMNS = ("drive.volts", "drive.speed")
CHECKS = DataChecks(COLUMNS, ranges={"drive.speed": (-10.0, 100.0)}, limits={"drive.volts": (-24.0, 24.0)})


def rows(*pairs: tuple[float, float]) -> np.ndarray:
    return np.array(pairs)


def present(values: np.ndarray) -> list[tuple[str, str]]:
    return [(alarm, signal) for alarm, signal, finding in CHECKS.findings(values) if finding.present]


def test_rows_outside_what_the_instrument_can_show_are_not_credible() -> None:
    values = rows((0.0, -10.0), (0.0, -10.1), (0.0, 100.0), (0.0, 100.1), (0.0, np.inf), (99.0, 5.0))
    assert CHECKS.credible(values).tolist() == [True, False, True, False, False, True]


def test_a_missing_output_is_no_reading_out_of_range() -> None:
    values = rows((0.0, np.nan))
    assert CHECKS.credible(values).tolist() == [True]
    assert present(values) == []


def test_out_of_range_names_signal_reading_and_range() -> None:
    values = rows((0.0, 5.0), (0.0, 250.0), (0.0, 5.0))
    assert present(values) == [("out_of_range", "drive.speed")]
    (text,) = [f.text for _, _, f in CHECKS.findings(values) if f.present]
    assert "drive.speed" in text
    assert "250" in text
    assert "-10 … 100" in text


@pytest.mark.parametrize(("end", "inside"), [(24.0, 23.9), (-24.0, -23.9), (30.0, 0.0)])
def test_saturated_while_a_whole_block_stands_at_an_end(end: float, inside: float) -> None:
    assert present(rows((end, 1.0), (end, 2.0))) == [("saturated", "drive.volts")]
    assert present(rows((end, 1.0), (inside, 2.0))) == []


def test_standing_at_one_end_and_then_at_the_other_is_no_saturation() -> None:
    assert present(rows((24.0, 1.0), (-24.0, 2.0))) == []


def test_every_watched_signal_is_told_of_at_every_block() -> None:
    """The alarm book must hear of the end of a condition as well."""
    told = [(alarm, signal) for alarm, signal, _ in CHECKS.findings(rows((0.0, 0.0)))]
    assert told == [("out_of_range", "drive.speed"), ("saturated", "drive.volts")]


def test_without_ranges_everything_is_credible() -> None:
    checks = DataChecks(COLUMNS, ranges={}, limits={})
    values = rows((1e300, -1e300))
    assert checks.credible(values).all()
    assert checks.findings(values) == []
