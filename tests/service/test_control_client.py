"""Where nobody answers, or somebody else, the client says what it tried and the mend."""

from __future__ import annotations

import json
import threading
from pathlib import Path
from typing import Any

import pytest

from rtid.errors import InputOutputError, RtidError, Unavailable, UsageError
from rtid.service import control_client, control_socket


def refused(path: Path) -> str:
    with pytest.raises(Unavailable) as error:
        control_client.ask(path, {"do": "status"})
    text = str(error.value)
    assert text.startswith(f"{path}: ")
    return text


def told(path: Path, reply: bytes) -> dict[str, Any]:
    """Ask somebody who reads a line and says `reply`."""
    with control_socket.listen(path) as listener:

        def serve() -> None:
            client, _ = listener.accept()
            with client:
                client.recv(65536)
                client.sendall(reply)

        server = threading.Thread(target=serve)
        server.start()
        try:
            return control_client.ask(path, {"do": "status"})
        finally:
            server.join()


def test_no_socket(tmp_path: Path) -> None:
    assert "is it running? --config FILE" in refused(tmp_path / "none")


def test_the_socket_of_a_service_that_was_killed(tmp_path: Path) -> None:
    control_socket.listen(tmp_path / "s").close()
    assert "has ended; start it again" in refused(tmp_path / "s")


def test_something_that_is_no_socket_and_a_name_that_is_too_long(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    refused(tmp_path / "file")
    assert "too long" in refused(tmp_path / ("x" * 120))


def test_no_permission_names_the_group(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def forbidden(path: Path, request: bytes) -> bytes:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(control_client, "_exchange", forbidden)
    group = control_client.grp.getgrgid(tmp_path.stat().st_gid).gr_name
    assert f"join the group {group} that owns it" in refused(tmp_path / "s")
    assert "join the group that owns it" in refused(Path("/no/such/folder"))


def test_a_service_that_does_not_answer(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(control_client, "ANSWER_S", 0.05)
    with control_socket.listen(tmp_path / "s"):
        assert "did not answer within 0.05 s" in refused(tmp_path / "s")


@pytest.mark.parametrize("reply", [b"", b'{"ok":true,"answer":{'])
def test_an_answer_that_breaks_off(tmp_path: Path, reply: bytes) -> None:
    with pytest.raises(Unavailable, match="ended before it answered"):
        told(tmp_path / "s", reply)


@pytest.mark.parametrize("reply", [b"220 mail\n", b"[]\n", b"{}\n", b'{"ok":true}\n', b'{"ok":false}\n', b"\xff\n"])
def test_somebody_else_at_the_other_end(tmp_path: Path, reply: bytes) -> None:
    with pytest.raises(Unavailable, match="does not speak as rtid does"):
        told(tmp_path / "s", reply)


@pytest.mark.parametrize(
    ("code", "kind"), [(64, UsageError), (69, Unavailable), (74, InputOutputError), (70, RtidError), (999, RtidError)]
)
def test_an_error_of_the_service_comes_out_as_it_was(tmp_path: Path, code: int, kind: type[RtidError]) -> None:
    reply = json.dumps({"ok": False, "error": "not now", "exit_code": code}).encode() + b"\n"
    with pytest.raises(kind, match="^not now$") as error:
        told(tmp_path / "s", reply)
    assert type(error.value) is kind


def test_a_refusal_that_comes_before_the_request_was_heard_is_read(tmp_path: Path) -> None:
    path = tmp_path / "s"
    reply = b'{"ok":false,"error":"16 clients","exit_code":69}\n'
    with control_socket.listen(path) as listener:

        def refuse() -> None:
            client, _ = listener.accept()
            with client:
                client.sendall(reply)

        server = threading.Thread(target=refuse)
        server.start()
        with pytest.raises(Unavailable, match="^16 clients$"):
            control_client.ask(path, {"do": "note", "text": "x" * 500_000})
        server.join()
