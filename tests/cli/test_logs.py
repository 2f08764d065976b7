"""A log line is one line."""

from __future__ import annotations

import logging

from rtid.cli.logs import OneLine


def record(text: str, error: Exception | None = None) -> logging.LogRecord:
    trace = (type(error), error, None) if error else None
    return logging.LogRecord("rtid", logging.ERROR, __file__, 1, text, (), trace)


def test_line_breaks_in_a_message_become_spaces() -> None:
    assert OneLine(tracebacks=False).format(record("a\nb\r\n c")).endswith(" ERROR a b c")


def test_an_exception_is_named_without_its_traceback() -> None:
    text = OneLine(tracebacks=False).format(record("failed", ValueError("bad\nnumber")))
    assert text.endswith(" ERROR failed (ValueError: bad number)")
