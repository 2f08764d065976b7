"""The state directory: made when it is missing, and held by one service at a time."""

from __future__ import annotations

import fcntl
import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from rtid.errors import CannotCreate, Unavailable

LOCK_NAME = "lock"


def make_folder(path: str | os.PathLike[str]) -> Path:
    """The folder, made if needed. Raises CannotCreate."""
    folder = Path(path)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise CannotCreate(f"{folder}: the folder cannot be made: {error.strerror}; choose another one") from None
    if not os.access(folder, os.W_OK | os.X_OK):
        raise CannotCreate(f"{folder}: the folder cannot be written to; change its owner or choose another one")
    return folder


@contextmanager
def held(path: str | os.PathLike[str]) -> Iterator[Path]:
    """The state directory, locked against a second service until the block is left.

    Raises CannotCreate, or Unavailable while another service holds it. The lock goes with the process that held it,
    however it ended.
    """
    folder = make_folder(path)
    try:
        lock = open(folder / LOCK_NAME, "ab")  # noqa: SIM115
    except OSError as error:
        raise CannotCreate(f"{folder}: the lock cannot be made: {error.strerror}; choose another state_dir") from None
    with lock:
        try:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            raise Unavailable(
                f"{folder}: another rtid service holds this state_dir; stop it or give this one its own state_dir"
            ) from None
        yield folder
