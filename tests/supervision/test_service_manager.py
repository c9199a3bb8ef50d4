"""What the service manager is told, and when."""

from __future__ import annotations

import os
import socket
from collections.abc import Iterator
from pathlib import Path

import pytest

from tagstream.supervision.service_manager import ServiceManager


@pytest.fixture
def listening(tmp_path: Path) -> Iterator[tuple[str, socket.socket]]:
    path = str(tmp_path / "notify")
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as inbox:
        inbox.bind(path)
        inbox.setblocking(False)
        yield path, inbox


def told(inbox: socket.socket) -> list[str]:
    found = []
    while True:
        try:
            found.append(inbox.recv(4096).decode())
        except BlockingIOError:
            return found


def test_readiness_and_stop_are_told(listening: tuple[str, socket.socket]) -> None:
    path, inbox = listening
    environment = {"NOTIFY_SOCKET": path}
    manager = ServiceManager(environment)
    manager.starting()
    manager.ready()
    manager.status("running")
    manager.stopping()
    first, *rest = told(inbox)
    assert "EXTEND_TIMEOUT_USEC=" in first
    assert rest[:2] == ["READY=1", "STATUS=running"]
    assert rest[2].startswith("STOPPING=1")
    assert environment == {}  # no child may speak for this process


def test_the_watchdog_hears_of_progress_alone(listening: tuple[str, socket.socket]) -> None:
    path, inbox = listening
    now = [0.0]
    environment = {
        "NOTIFY_SOCKET": path,
        "WATCHDOG_USEC": "4000000",
        "WATCHDOG_PID": str(os.getpid()),
    }
    manager = ServiceManager(environment, lambda: now[0])
    manager.alive(5)
    assert told(inbox) == []  # not due yet
    now[0] = 1.0
    manager.alive(5)
    assert told(inbox) == ["WATCHDOG=1"]
    now[0] = 9.0
    manager.alive(5)
    assert told(inbox) == []  # nothing has moved
    manager.alive(6)
    assert told(inbox) == ["WATCHDOG=1"]


def test_an_abstract_socket() -> None:
    name = f"tagstream-test-{os.getpid()}"
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as inbox:
        inbox.bind("\0" + name)
        ServiceManager({"NOTIFY_SOCKET": "@" + name}).ready()
        assert inbox.recv(100) == b"READY=1"


@pytest.mark.parametrize(
    "environment",
    [{}, {"NOTIFY_SOCKET": "/nowhere"}, {"WATCHDOG_USEC": "4", "WATCHDOG_PID": "1"}],
    ids=["nobody", "gone", "another process"],
)
def test_without_a_service_manager_nothing_happens(environment: dict[str, str]) -> None:
    now = [0.0]
    manager = ServiceManager(environment, lambda: now[0])
    manager.ready()
    now[0] = 100.0
    manager.alive(1)
    manager.stopping()
