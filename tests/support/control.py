"""The far end of a control socket, byte by byte."""

from __future__ import annotations

import json
import socket
from pathlib import Path
from typing import Any

PATIENCE_S = 15.0


def connect(path: Path) -> socket.socket:
    client = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
    client.settimeout(PATIENCE_S)
    try:
        client.connect(str(path))
    except OSError:
        client.close()
        raise
    return client


def listens(path: Path) -> bool:
    """A service has made its socket and takes connections."""
    try:
        connect(path).close()
    except OSError:
        return False
    return True


def answers(path: Path, data: bytes) -> list[dict[str, Any]]:
    """All that the service says to these bytes: it must be whole lines of JSON objects."""
    with connect(path) as client:
        try:
            client.sendall(data)
            client.shutdown(socket.SHUT_WR)
        except OSError:  # it had heard enough
            pass
        return lines_of(client)


def lines_of(client: socket.socket) -> list[dict[str, Any]]:
    """Until the service hangs up."""
    received = b""
    try:
        while more := client.recv(65536):
            received += more
    except ConnectionResetError:  # it hung up without having read everything
        pass
    assert received == b"" or received.endswith(b"\n")
    found = [json.loads(line) for line in received.splitlines()]
    for answer in found:
        assert answer["ok"] or ("\n" not in answer["error"] and isinstance(answer["exit_code"], int))
    return found


def do(path: Path, **request: Any) -> dict[str, Any]:
    """The one answer to one request."""
    (answer,) = answers(path, json.dumps(request).encode() + b"\n")
    return answer
