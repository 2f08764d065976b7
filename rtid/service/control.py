"""The control socket's server: threads of its own, so that nothing a client does can hold up the worker."""

from __future__ import annotations

import logging
import socket
import threading
import time
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from rtid.errors import RtidError, Unavailable, UsageError
from rtid.service import control_socket
from rtid.service.control_request import MOST_BYTES, Request, answer_line, parse, refusal_line

IDLE_S = 5.0  # longest wait for one whole request, and for a client to take its answer
MOST_CLIENTS = 16
RETRY_S = 0.2

log = logging.getLogger("rtid.service")

Answer = Callable[[Request, str], Mapping[str, Any]]  # raises RtidError; the text is who asks


class ControlServer:
    """`with ControlServer(path, answer):` serves until the block is left; `answer` is called by several threads.

    Entering raises Unavailable while another service listens there, and CannotCreate.
    """

    def __init__(self, path: Path, answer: Answer) -> None:
        self._path = path
        self._answer = answer
        self._clients: set[socket.socket] = set()
        self._lock = threading.Lock()
        self._stopping = threading.Event()

    def __enter__(self) -> Self:
        self._listener = control_socket.listen(self._path)
        self._thread = threading.Thread(target=self._accept_all, name="control", daemon=True)
        self._thread.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        """Nobody new, and nobody is waited for."""
        self._stopping.set()
        control_socket.remove(self._path)
        self._listener.shutdown(socket.SHUT_RDWR)  # wakes the thread that waits in accept
        self._thread.join()
        self._listener.close()
        with self._lock:
            for client in self._clients:
                _hang_up(client)

    def _accept_all(self) -> None:
        while not self._stopping.is_set():
            try:
                client, _ = self._listener.accept()
            except OSError:  # shut down, or out of file numbers for a while
                self._stopping.wait(RETRY_S)
                continue
            client.settimeout(IDLE_S)
            if not self._admit(client):
                _refuse(client)

    def _admit(self, client: socket.socket) -> bool:
        with self._lock:
            if len(self._clients) >= MOST_CLIENTS:
                return False
            self._clients.add(client)
        try:
            threading.Thread(target=self._attend, args=(client,), name="control-client", daemon=True).start()
        except RuntimeError:  # no more threads
            self._clients.discard(client)
            return False
        return True

    def _attend(self, client: socket.socket) -> None:
        try:
            for line in _lines(client):
                client.sendall(self._reply(line, client))
        except RtidError as error:
            _send(client, refusal_line(error))
        except OSError:  # gone, or does not take its answer
            pass
        finally:
            with self._lock:
                self._clients.discard(client)
                client.close()

    def _reply(self, line: bytes, client: socket.socket) -> bytes:
        try:
            return answer_line(self._answer(parse(line), control_socket.peer_name(client)))
        except RtidError as error:
            return refusal_line(error)
        except Exception as error:
            log.exception("a request on the control socket failed")
            return refusal_line(RtidError(f"unexpected {type(error).__name__}: {error}"))


def _lines(client: socket.socket) -> Iterator[bytes]:
    """Requests without their line ends, until the client has nothing more to say.

    Raises UsageError for one that is too long or does not come to its end in time.
    """
    found, rest = b"\n", b""
    while found:
        line, found, rest = _more(client, rest).partition(b"\n")
        if len(line) > MOST_BYTES:
            raise UsageError(f"bad request: longer than {MOST_BYTES} bytes")
        if line.strip():
            yield line


def _more(client: socket.socket, data: bytes) -> bytes:
    """`data` and what follows: up to a line end at least, or until it is too long, or all there is."""
    deadline = time.monotonic() + IDLE_S
    try:
        while b"\n" not in data and len(data) <= MOST_BYTES:
            client.settimeout(max(deadline - time.monotonic(), 0.001))
            received = client.recv(MOST_BYTES)
            if not received:
                break
            data += received
    except TimeoutError:
        if data:
            raise UsageError(f"bad request: its line end did not come within {IDLE_S:g} s") from None
    finally:
        client.settimeout(IDLE_S)
    return data


def _refuse(client: socket.socket) -> None:
    _send(client, refusal_line(Unavailable(f"{MOST_CLIENTS} clients are connected already; try again")))
    client.close()


def _send(client: socket.socket, line: bytes) -> None:
    try:
        client.sendall(line)
    except OSError:
        return


def _hang_up(client: socket.socket) -> None:
    try:
        client.shutdown(socket.SHUT_RDWR)
    except OSError:
        return
