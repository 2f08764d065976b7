"""The file of the socket: its place, its mode, and what stood there before."""

from __future__ import annotations

import getpass
import os
import socket
import stat
from pathlib import Path

import pytest

from rtid.errors import CannotCreate, Unavailable
from rtid.service import control_socket


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "control.sock"


def test_it_lies_in_the_runtime_directory_of_systemd_else_with_the_state() -> None:
    assert control_socket.socket_path("state", {"RUNTIME_DIRECTORY": "/run/rtid:/run/x"}) == Path(
        "/run/rtid/control.sock"
    )
    assert control_socket.socket_path("state", {}) == Path("state/control.sock")


def test_only_owner_and_group_may_connect_whatever_the_umask(path: Path) -> None:
    before = os.umask(0)
    try:
        with control_socket.listen(path):
            assert stat.S_IMODE(path.stat().st_mode) == 0o660
    finally:
        os.umask(before)


def test_the_file_of_a_dead_service_is_replaced(path: Path) -> None:
    control_socket.listen(path).close()
    assert path.is_socket()
    with control_socket.listen(path), socket.socket(socket.AF_UNIX) as client:
        client.connect(str(path))


def test_a_living_service_is_left_alone(path: Path) -> None:
    with control_socket.listen(path):
        with pytest.raises(Unavailable, match="another rtid service listens there"):
            control_socket.listen(path)
        with socket.socket(socket.AF_UNIX) as client:
            client.connect(str(path))


def test_something_else_of_that_name_is_not_touched(path: Path) -> None:
    path.write_text("precious")
    with pytest.raises(CannotCreate, match="is no socket"):
        control_socket.listen(path)
    assert path.read_text() == "precious"


@pytest.mark.parametrize("folder", ["missing", "x" * 120])
def test_where_it_cannot_be_made_is_said(tmp_path: Path, folder: str) -> None:
    if len(folder) > 100:
        (tmp_path / folder).mkdir()
    with pytest.raises(CannotCreate, match="choose another state_dir"):
        control_socket.listen(tmp_path / folder / "control.sock")


def test_the_kernel_vouches_for_the_name_at_the_other_end(monkeypatch: pytest.MonkeyPatch) -> None:
    here, there = socket.socketpair(socket.AF_UNIX, socket.SOCK_STREAM)
    with here, there:
        assert control_socket.peer_name(here) == getpass.getuser()
        monkeypatch.setattr(control_socket.pwd, "getpwuid", lambda user: {}[user])
        assert control_socket.peer_name(here) == f"user {os.getuid()}"
