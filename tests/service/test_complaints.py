"""Losses are said in the log, seldom enough to be read."""

from __future__ import annotations

import logging

import pytest

from rtid.intake.reading import Counts, Rejected
from rtid.service.complaints import Complaints


def lines(caplog: pytest.LogCaptureFixture) -> list[str]:
    return [record.getMessage() for record in caplog.records]


def test_what_was_lost_is_said_with_its_kind(caplog: pytest.LogCaptureFixture) -> None:
    counts = Counts()
    complaints = Complaints({"drive": counts})
    counts.reject(Rejected("checksum", "bad"))
    counts.dropped = 7
    with caplog.at_level(logging.WARNING):
        complaints.look(0.0)
    assert lines(caplog) == ["drive: lost since the last such line: 1 checksum; 7 dropped because the queue was full"]


def test_a_bad_line_is_said_once_per_ten_seconds_and_only_what_is_new(caplog: pytest.LogCaptureFixture) -> None:
    counts = Counts()
    complaints = Complaints({"drive": counts})
    with caplog.at_level(logging.WARNING):
        for tenth in range(200):  # 20 s, ten losses a second
            counts.reject(Rejected("checksum", "bad"))
            complaints.look(0.1 * tenth)
    assert [line.rpartition(": ")[2] for line in lines(caplog)] == ["1 checksum", "100 checksum"]


def test_nothing_lost_says_nothing(caplog: pytest.LogCaptureFixture) -> None:
    with caplog.at_level(logging.WARNING):
        Complaints({"drive": Counts()}).look(0.0)
    assert lines(caplog) == []


def test_what_was_said_is_not_said_again_after_a_new_configuration(caplog: pytest.LogCaptureFixture) -> None:
    stays, gone = Counts(dropped=3), Counts(dropped=4)
    complaints = Complaints({"drive": stays, "hall": gone})
    with caplog.at_level(logging.WARNING):
        complaints.look(0.0)
        complaints.follow({"drive": stays, "hall": Counts(dropped=1)})
        complaints.look(20.0)
    assert [line.partition(":")[0] for line in lines(caplog)] == ["drive", "hall", "hall"]
