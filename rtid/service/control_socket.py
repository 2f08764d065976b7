"""The file of the control socket: where it lies, how it is made, and who is at the other end."""

from __future__ import annotations

import contextlib
import os
import pwd
import socket
import stat
import struct
from collections.abc import Mapping
from pathlib import Path

from rtid.errors import CannotCreate, Unavailable

SOCKET_NAME = "control.sock"
MODE = 0o660  # its owner and its group may act on the service
WAITING = 16  # connections that the kernel keeps until they are taken

_CREDENTIAL = struct.Struct("3i")  # process, user, group (SO_PEERCRED)


def socket_path(state_dir: str | os.PathLike[str], environ: Mapping[str, str] = os.environ) -> Path:
    """In the first folder of RUNTIME_DIRECTORY (systemd), else in the state directory."""
    runtime = environ.get("RUNTIME_DIRECTORY", "").split(":")[0]
    return Path(runtime or state_dir) / SOCKET_NAME


def listen(path: Path) -> socket.socket:
    """A listening socket under `path`; the file that a dead service left is replaced.

    Raises Unavailable while a service listens there, CannotCreate when it cannot be made.
    """
    try:
        _remove_stale(path)
        return _bound(path)
    except OSError as error:
        why = error.strerror or str(error)
        raise CannotCreate(f"{path}: the control socket cannot be made: {why}; choose another state_dir") from None


def remove(path: Path) -> None:
    with contextlib.suppress(OSError):
        path.unlink()


def peer_name(connection: socket.socket) -> str:
    """The login name of the process at the other end, as the kernel vouches for it."""
    credential = connection.getsockopt(socket.SOL_SOCKET, socket.SO_PEERCRED, _CREDENTIAL.size)
    user = _CREDENTIAL.unpack(credential)[1]
    try:
        return pwd.getpwuid(user).pw_name
    except KeyError:
        return f"user {user}"


def _bound(path: Path) -> socket.socket:
    listener = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
    try:
        listener.bind(str(path))
        path.chmod(MODE)  # before listen: until then nobody can connect
        listener.listen(WAITING)
    except OSError:
        listener.close()
        raise
    return listener


def _remove_stale(path: Path) -> None:
    try:
        kind = path.lstat().st_mode
    except FileNotFoundError:
        return
    if not stat.S_ISSOCK(kind):
        raise CannotCreate(f"{path}: something that is no socket has this name; move it away")
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
        probe.settimeout(1.0)
        try:
            probe.connect(str(path))
        except ConnectionRefusedError:
            path.unlink()
            return
        except TimeoutError:  # its queue of connections is full: it lives
            pass
    raise Unavailable(f"{path}: another rtid service listens there; stop it or give this one its own state_dir")
