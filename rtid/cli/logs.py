"""The log of a long-running command: one line each on stderr, in plain words.

In systemd's journal, which knows the time, a line begins with its severity (RFC 5424, as in sd-daemon(3)); elsewhere
with the time.
"""

from __future__ import annotations

import logging
import os
import sys
from collections.abc import Mapping
from typing import TextIO

from rtid.cli.log_limit import LimitedHandler

SEVERITIES = {logging.CRITICAL: 2, logging.ERROR: 3, logging.WARNING: 4, logging.INFO: 6, logging.DEBUG: 7}


class OneLine(logging.Formatter):
    """Whatever is in a message, it stays one line; a traceback is shown only on request."""

    def __init__(self, *, tracebacks: bool, journal: bool = False) -> None:
        layout = "%(message)s" if journal else "%(asctime)s %(levelname)s %(message)s"
        super().__init__(layout, "%Y-%m-%d %H:%M:%S")
        self._tracebacks = tracebacks
        self._journal = journal

    def format(self, record: logging.LogRecord) -> str:
        text = super().format(record if self._tracebacks else _plain(record))
        if not self._journal:
            return text
        return "\n".join(severity(record.levelno) + line for line in text.splitlines())


def severity(level: int) -> str:
    """How a line of this level begins in the journal."""
    return f"<{SEVERITIES.get(level, SEVERITIES[logging.INFO])}>"


def in_journal(stream: TextIO, environ: Mapping[str, str] = os.environ) -> bool:
    """Whether systemd's journal reads this stream: JOURNAL_STREAM names its device and inode (systemd.exec(5))."""
    try:
        there = os.fstat(stream.fileno())
    except OSError:  # a stream without a file behind it
        return False
    return environ.get("JOURNAL_STREAM") == f"{there.st_dev}:{there.st_ino}"


def start(*, level: int = logging.INFO, tracebacks: bool = False) -> None:
    """Send the log of this process to stderr."""
    handler = LimitedHandler(sys.stderr)
    handler.setFormatter(OneLine(tracebacks=tracebacks, journal=in_journal(sys.stderr)))
    logging.basicConfig(level=level, handlers=[handler], force=True)
    logging.getLogger("rtid.mqtt").setLevel(max(level, logging.ERROR))  # why a broker is away, rtid.publish says


def _plain(record: logging.LogRecord) -> logging.LogRecord:
    error = record.exc_info[1] if record.exc_info else None
    text = record.getMessage() + (f" ({type(error).__name__}: {error})" if error else "")
    changes = {"msg": " ".join(text.split()), "args": None, "exc_info": None, "exc_text": None, "stack_info": None}
    return logging.makeLogRecord({**record.__dict__, **changes})
