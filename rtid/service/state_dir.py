"""The state directory: made when it is missing, and held by one service at a time."""

from __future__ import annotations

import errno
import fcntl
import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from rtid.errors import CannotCreate, Unavailable


def make_folder(path: str | os.PathLike[str]) -> Path:
    """The folder, made if needed, to be written to. Raises CannotCreate."""
    folder = _made(path)
    if not os.access(folder, os.W_OK | os.X_OK):
        raise CannotCreate(f"{folder}: the folder cannot be written to; change its owner or choose another one")
    return folder


@contextmanager
def held(path: str | os.PathLike[str]) -> Iterator[Path]:
    """The state directory, locked against a second service until the block is left.

    The lock is on the folder itself, so it can be had where nothing can be written (a service goes on watching there,
    with its alarm `storage`), and it goes with the process that held it, however it ended. Raises CannotCreate, or
    Unavailable while another service holds it.
    """
    folder = _made(path)
    try:
        descriptor = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    except OSError as error:
        raise CannotCreate(f"{folder}: the folder cannot be read: {error.strerror}; choose another state_dir") from None
    try:
        _lock(descriptor, folder)
        yield folder
    finally:
        os.close(descriptor)


def _made(path: str | os.PathLike[str]) -> Path:
    folder = Path(path)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise CannotCreate(f"{folder}: the folder cannot be made: {error.strerror}; choose another one") from None
    return folder


def _lock(descriptor: int, folder: Path) -> None:
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        if error.errno == errno.EWOULDBLOCK:
            raise Unavailable(
                f"{folder}: another rtid service holds this state_dir; stop it or give this one its own state_dir"
            ) from None
        raise CannotCreate(f"{folder}: cannot be locked ({error.strerror}); choose one on this computer") from None
