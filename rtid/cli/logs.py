"""The log of a long-running command: one line each on stderr, in plain words."""

from __future__ import annotations

import logging
import sys


class OneLine(logging.Formatter):
    """Whatever is in a message, it stays one line; a traceback is shown only on request."""

    def __init__(self, *, tracebacks: bool) -> None:
        super().__init__("%(asctime)s %(levelname)s %(message)s", "%Y-%m-%d %H:%M:%S")
        self._tracebacks = tracebacks

    def format(self, record: logging.LogRecord) -> str:
        if self._tracebacks:
            return super().format(record)
        error = record.exc_info[1] if record.exc_info else None
        text = record.getMessage() + (f" ({type(error).__name__}: {error})" if error else "")
        plain = logging.makeLogRecord(
            {
                **record.__dict__,
                "msg": " ".join(text.split()),
                "args": None,
                "exc_info": None,
                "exc_text": None,
                "stack_info": None,
            }
        )
        return super().format(plain)


def start(*, level: int = logging.INFO, tracebacks: bool = False) -> None:
    """Send the log of this process to stderr."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(OneLine(tracebacks=tracebacks))
    logging.basicConfig(level=level, handlers=[handler], force=True)
    logging.getLogger("rtid.mqtt").setLevel(max(level, logging.WARNING))
