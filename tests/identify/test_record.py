"""The rows that a loop keeps: the newest, in whole blocks, with the gaps between them."""

from __future__ import annotations

import numpy as np
import pytest

from rtid.identify.record import Record, RecordKeeper


def keeper(limit: int, blocks: list[tuple[int, bool]]) -> RecordKeeper:
    """Blocks of (rows, whether a new stretch begins); row k holds the input k and the output -k."""
    kept, at = RecordKeeper(limit), 0
    for m, new_stretch in blocks:
        rows = np.arange(at, at + m, dtype=np.float64)
        kept.append(rows[:, None], -rows, rows % 5 != 4, new_stretch=new_stretch)
        at += m
    return kept


def test_blocks_come_back_as_one_record() -> None:
    record = keeper(100, [(4, True), (3, False), (5, True), (2, False)]).record()
    assert record.output.tolist() == (-np.arange(14.0)).tolist()
    assert record.inputs[:, 0].tolist() == np.arange(14.0).tolist()
    assert record.ok.tolist() == [k % 5 != 4 for k in range(14)]
    assert record.starts == (0, 7)


def test_the_oldest_blocks_go_when_the_limit_is_kept_without_them() -> None:
    kept = keeper(10, [(4, True)] * 5)
    assert kept.rows == 12
    assert kept.record().output[0] == -8.0
    assert kept.record().starts == (0, 4, 8)


def test_the_older_half_is_dropped_in_whole_blocks() -> None:
    kept = keeper(100, [(4, True), (4, False), (4, True), (4, False), (4, False)])
    kept.drop_older_half()
    assert (kept.rows, kept.record().output[0], kept.record().starts) == (8, -12.0, (0,))


def test_one_block_is_never_dropped() -> None:
    kept = keeper(2, [(8, True)])
    kept.drop_older_half()
    assert kept.rows == 8


@pytest.mark.parametrize(
    ("first", "last", "starts"), [(0, 14, (0, 5, 9)), (5, 14, (0, 4)), (6, 9, (0,)), (3, 10, (0, 2, 6))]
)
def test_a_part_knows_its_own_gaps(first: int, last: int, starts: tuple[int, ...]) -> None:
    record = Record(np.zeros((14, 1)), np.arange(14.0), np.ones(14, dtype=np.bool_), (0, 5, 9))
    part = record.part(first, last)
    assert part.starts == starts
    assert part.output.tolist() == np.arange(first, last).tolist()


def test_halves_share_the_rows() -> None:
    record = Record(np.zeros((9, 1)), np.arange(9.0), np.ones(9, dtype=np.bool_), (0, 6))
    older, newer = record.halves()
    assert (len(older), len(newer), newer.starts) == (4, 5, (0, 2))
