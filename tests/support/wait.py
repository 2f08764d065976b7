"""Waiting for something that another thread or process does: poll with a deadline, never a bare sleep."""

from __future__ import annotations

import time
from collections.abc import Callable


def wait_until(condition: Callable[[], object], seconds: float = 10.0, *, what: str = "the condition") -> None:
    """Return as soon as `condition()` is true; fail the test after `seconds`."""
    deadline = time.monotonic() + seconds
    while not condition():
        if time.monotonic() > deadline:
            raise AssertionError(f"{what} did not come true within {seconds:g} s")
        time.sleep(0.01)
