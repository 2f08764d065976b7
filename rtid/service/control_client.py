"""The other end of the control socket: one request, one answer, and plain words where there is no service."""

from __future__ import annotations

import contextlib
import grp
import json
import socket
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rtid.errors import DataError, InputOutputError, RtidError, Unavailable, UsageError

MOST_BYTES = 64 * 1024 * 1024  # of an answer
ANSWER_S = 30.0

_ERRORS: dict[int, type[RtidError]] = {
    kind.exit_code: kind for kind in (UsageError, DataError, Unavailable, InputOutputError)
}


def ask(path: Path, request: Mapping[str, Any]) -> dict[str, Any]:
    """The answer of the service that listens under `path`. Raises Unavailable, or the error that the service tells."""
    try:
        line = _exchange(path, json.dumps(request, allow_nan=False).encode("ascii") + b"\n")
    except OSError as error:
        raise Unavailable(f"{path}: {_why(path, error)}") from None
    return _answer(path, line)


def _exchange(path: Path, request: bytes) -> bytes:
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as connection:
        connection.settimeout(ANSWER_S)
        connection.connect(str(path))
        with contextlib.suppress(BrokenPipeError):  # it refused before it heard the request: its answer says why
            connection.sendall(request)
        with connection.makefile("rb") as stream:
            return stream.readline(MOST_BYTES)


def _answer(path: Path, line: bytes) -> dict[str, Any]:
    if not line.endswith(b"\n"):
        raise Unavailable(f"{path}: the service ended before it answered; start it again")
    try:
        reply = json.loads(line)
        if reply["ok"]:
            return dict(reply["answer"])
        text, code = str(reply["error"]), reply["exit_code"]
    except (ValueError, TypeError, KeyError):
        raise Unavailable(f"{path}: what listens there does not speak as rtid does; give another --socket") from None
    raise _ERRORS.get(code, RtidError)(text)


def _why(path: Path, error: OSError) -> str:
    """What is wrong, and the mend."""
    if isinstance(error, FileNotFoundError):
        return (
            "no service listens there; is it running? --config FILE names its configuration, --socket PATH its socket"
        )
    if isinstance(error, ConnectionRefusedError):
        return "the service that made this socket has ended; start it again"
    if isinstance(error, PermissionError):
        return f"no permission; be root, or join the group {_group(path)}, then log in again"
    if isinstance(error, TimeoutError):
        return f"the service did not answer within {ANSWER_S:g} s; is the computer busy, or the service stopped?"
    return f"cannot be talked to ({error.strerror or error}); is it the control socket of rtid?"


def _group(path: Path) -> str:
    for place in (path, path.parent):  # the folder may be closed to others
        with contextlib.suppress(OSError, KeyError):
            return f"{grp.getgrgid(place.stat().st_gid).gr_name} that owns it"
    return "that owns it"
