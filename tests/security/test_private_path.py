"""Socket files that nobody else reaches, takes away or loses."""

from __future__ import annotations

import os
import socket
from pathlib import Path

import pytest
import zmq

from tagstream.errors import RunBusyError, SettingsError
from tagstream.security import Sockets
from tagstream.security.private_path import PrivatePath


def test_only_the_owner_reaches_it_and_it_is_gone_in_the_end(tmp_path: Path) -> None:
    path = tmp_path / "made" / "control"
    before = os.umask(0o022)
    try:
        with Sockets() as sockets:
            sockets.bind(sockets.open(zmq.REP), f"ipc://{path}")
            assert path.is_socket()
            assert path.stat().st_mode & 0o777 == 0o600
            assert path.parent.stat().st_mode & 0o777 == 0o700
        assert os.umask(0o022) == 0o022
    finally:
        os.umask(before)
    assert not path.exists()


def test_a_path_that_is_held_is_not_taken(tmp_path: Path) -> None:
    path = tmp_path / "control"
    with Sockets() as first, Sockets() as second:
        first.bind(first.open(zmq.REP), f"ipc://{path}")
        with pytest.raises(RunBusyError, match=rf"control: process {os.getpid()} listens"):
            second.bind(second.open(zmq.REP), f"ipc://{path}")
        assert path.is_socket()


def test_a_file_that_is_no_socket_is_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "results"
    path.write_text("a year of work")
    for _ in range(2):  # the lock is given back
        with pytest.raises(SettingsError, match="exists and is no socket"):
            PrivatePath(path)
    assert path.read_text() == "a year of work"


def test_a_socket_that_was_left_behind_is_replaced(tmp_path: Path) -> None:
    path = tmp_path / "control"
    with socket.socket(socket.AF_UNIX) as left:
        left.bind(str(path))
    with Sockets() as sockets:
        sockets.bind(sockets.open(zmq.REP), f"ipc://{path}")
        assert path.is_socket()


def test_where_no_socket_can_be_is_told(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(SettingsError, match="cannot be made"):
        PrivatePath(tmp_path / "file" / "control")
