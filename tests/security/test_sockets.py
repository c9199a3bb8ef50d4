"""Sockets with keys: who gets in, and what is refused before anything is bound."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
import zmq

from tagstream.errors import SettingsError
from tagstream.security import KeyFiles, Sockets, control_address, make_keys
from tagstream.settings.sections import Security

LOCAL = "tcp://127.0.0.1:*"
SHORT_MS, LONG_MS = 300, 5000


@pytest.fixture
def ours(tmp_path: Path) -> KeyFiles:
    return make_keys(tmp_path / "ours")


@pytest.fixture
def others(tmp_path: Path) -> KeyFiles:
    return make_keys(tmp_path / "others")


def guarded(files: KeyFiles) -> Security:
    return Security(keys=files.folder, authorised=files.authorised)


def wait(until: Callable[[], bool], socket: zmq.Socket[bytes]) -> None:
    for _ in range(LONG_MS // 50):
        if until():
            return
        socket.poll(50)
    raise AssertionError("waited in vain")


def test_an_authorised_key_gets_in_and_is_answered(ours: KeyFiles) -> None:
    with Sockets(guarded(ours)) as server, Sockets(Security(keys=ours.folder)) as client:
        rep, req = server.open(zmq.REP), client.open(zmq.REQ)
        client.connect(req, server.bind(rep, LOCAL), ours.public("server"))
        req.send(b"question")
        assert rep.poll(LONG_MS)
        assert rep.recv() == b"question"
        rep.send(b"answer")
        assert req.poll(LONG_MS)
        assert req.recv() == b"answer"
        assert (server.admitted, server.denied) == (1, 0)


def test_a_wrong_key_is_denied_counted_and_named(ours: KeyFiles, others: KeyFiles) -> None:
    with Sockets(guarded(ours)) as server, Sockets(Security(keys=others.folder)) as client:
        pull, push = server.open(zmq.PULL), client.open(zmq.PUSH)
        client.connect(push, server.bind(pull, LOCAL), ours.public("server"))
        push.send(b"let me in")
        wait(lambda: server.denied > 0, pull)
        assert pull.poll(SHORT_MS) == 0
        assert server.admitted == 0
        public = others.public("client").read_text().split('"')[1]
        assert server.last_denied == f"127.0.0.1 {public}"


def test_a_key_that_is_added_later_gets_in(ours: KeyFiles, others: KeyFiles) -> None:
    with Sockets(guarded(ours)) as server, Sockets(Security(keys=others.folder)) as client:
        pull, push = server.open(zmq.PULL), client.open(zmq.PUSH)
        address = server.bind(pull, LOCAL)
        (ours.authorised / "guest.public").write_bytes(others.public("client").read_bytes())
        client.connect(push, address, ours.public("server"))
        push.send(b"tags")
        assert pull.poll(LONG_MS)


def test_nobody_gets_in_without_a_key(ours: KeyFiles) -> None:
    with Sockets(guarded(ours)) as server, Sockets() as client:
        pull, push = server.open(zmq.PULL), client.open(zmq.PUSH)
        client.connect(push, server.bind(pull, LOCAL))
        push.send(b"let me in")
        assert pull.poll(SHORT_MS) == 0
        assert server.admitted == 0


def test_a_server_that_proves_to_be_another_gets_nothing(ours: KeyFiles, others: KeyFiles) -> None:
    impostor = Security(keys=others.folder, authorised=ours.authorised)
    with Sockets(impostor) as server, Sockets(Security(keys=ours.folder)) as client:
        pull, push = server.open(zmq.PULL), client.open(zmq.PUSH)
        client.connect(push, server.bind(pull, LOCAL), ours.public("server"))
        push.send(b"secret")
        assert pull.poll(SHORT_MS) == 0


def test_an_empty_folder_lets_in_nobody(ours: KeyFiles) -> None:
    ours.authorised_client.unlink()
    with Sockets(guarded(ours)) as server, Sockets(Security(keys=ours.folder)) as client:
        pull, push = server.open(zmq.PULL), client.open(zmq.PUSH)
        client.connect(push, server.bind(pull, LOCAL), ours.public("server"))
        push.send(b"tags")
        wait(lambda: server.denied > 0, pull)
        assert pull.poll(SHORT_MS) == 0


def test_others_are_not_served_without_keys(ours: KeyFiles) -> None:
    for security in (None, Security(keys=ours.folder)):
        with Sockets(security) as sockets:
            with pytest.raises(SettingsError, match="tagstream keys FOLDER"):
                sockets.bind(sockets.open(zmq.PUB), "tcp://0.0.0.0:*")
            with pytest.raises(SettingsError, match="tagstream keys FOLDER"):
                sockets.connect(sockets.open(zmq.SUB), "tcp://192.0.2.1:5571")
    with Sockets() as sockets, pytest.raises(SettingsError, match="keys of one's own"):
        sockets.connect(sockets.open(zmq.SUB), "tcp://127.0.0.1:5571", ours.public("server"))


def test_others_are_served_with_keys(ours: KeyFiles) -> None:
    with Sockets(guarded(ours)) as sockets:
        assert sockets.bind(sockets.open(zmq.PUB), "tcp://0.0.0.0:*").startswith("tcp://0.0.0.0:")


def test_a_broken_key_is_told_before_anything_is_bound(ours: KeyFiles) -> None:
    (ours.authorised / "broken.public").write_text("nothing")
    with Sockets(guarded(ours)) as sockets, pytest.raises(SettingsError, match=r"broken\.public"):
        sockets.bind(sockets.open(zmq.PULL), LOCAL)


@pytest.mark.parametrize("address", ["here", "tcp://127.0.0.1:99999", "ipc://control", "udp://a:1"])
def test_an_address_that_is_none_is_told(address: str) -> None:
    with Sockets() as sockets, pytest.raises(SettingsError, match="right would be"):
        sockets.bind(sockets.open(zmq.REP), address)


def test_sockets_may_be_closed_twice_and_opened_again() -> None:
    sockets = Sockets()
    sockets.close()
    for _ in range(2):
        sockets.bind(sockets.open(zmq.PULL), LOCAL)
        sockets.close()
    assert (sockets.admitted, sockets.denied, sockets.last_denied) == (0, 0, "")


@pytest.mark.parametrize(
    ("environment", "expected"),
    [
        (
            {"RUNTIME_DIRECTORY": "/run/tagstream:/run/b", "XDG_RUNTIME_DIR": "/run/user/1"},
            "ipc:///run/tagstream/lab.control",
        ),
        ({"XDG_RUNTIME_DIR": "/run/user/1"}, "ipc:///run/user/1/tagstream/lab.control"),
        ({}, None),
        ({"XDG_RUNTIME_DIR": "/" + "x" * 100}, None),
    ],
)
def test_where_the_control_socket_is(environment: dict[str, str], expected: str | None) -> None:
    address, note = control_address("auto", "lab", environment)
    assert address == expected
    assert (note == "") == (expected is not None)
    assert control_address("tcp://127.0.0.1:1", "lab", environment) == ("tcp://127.0.0.1:1", "")
