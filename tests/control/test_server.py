"""Whatever clients do, the next request is answered."""

from __future__ import annotations

import json
import random
import socket as plain_socket
import stat
from collections.abc import Mapping
from math import inf, nan
from pathlib import Path
from typing import Any

import pytest
import zmq

from tagstream.control import MarkRequest, PlainRequest, Request
from tagstream.control.client import ask
from tagstream.control.requests import MOST_BYTES, mark_request
from tagstream.control.server import MOST_AT_ONCE, ControlServer
from tagstream.errors import ResultsError, RunBusyError, SettingsError
from tagstream.security import Sockets, make_keys
from tagstream.settings.sections import Security
from tests.control.asked import answering

STATUS, STOP = PlainRequest(request="status"), PlainRequest(request="stop")


def handle(request: Request) -> Mapping[str, Any]:
    """Says what was asked; fails in two ways."""
    if isinstance(request, MarkRequest):
        return {"key": request.key, "value": request.value, "at_ps": request.at_ps}
    if request.request == "stop":
        raise ResultsError("cannot stop now")
    if request.request == "new-run":
        raise ZeroDivisionError("a fault of ours")
    return {"state": "running", "rate_hz": nan, "limit": inf}


@pytest.fixture
def address(tmp_path: Path) -> str:
    return f"ipc://{tmp_path}/control"


@pytest.fixture
def sockets() -> Any:
    with Sockets() as made:
        yield made


def connected(sockets: Sockets, address: str, kind: int = zmq.DEALER) -> Any:
    socket = sockets.open(kind)
    sockets.connect(socket, address)
    return socket


def test_requests_and_their_replies(address: str) -> None:
    with answering(address, handle) as server:
        assert ask(address, STATUS) == {
            "ok": True, "state": "running", "rate_hz": None, "limit": None,
        }  # fmt: skip
        mark = ask(address, mark_request("power", 1.5, 7))
        assert mark == {"ok": True, "key": "power", "value": 1.5, "at_ps": 7}
        assert ask(address, STOP) == {"ok": False, "error": "cannot stop now"}
    assert (server.answered, server.refused) == (2, 1)
    assert server.numbers["control_refused"] == 1


def test_a_fault_in_here_is_an_answer_and_ends_nothing(address: str) -> None:
    with answering(address, handle):
        told = ask(address, PlainRequest(request="new-run"))
        assert told == {"ok": False, "error": "internal error: ZeroDivisionError: a fault of ours"}
        assert ask(address, STATUS)["ok"]


def test_a_reply_that_is_no_json_is_a_fault_too(address: str) -> None:
    with answering(address, lambda request: {"state": object()}):
        assert "internal error: TypeError" in ask(address, STATUS)["error"]


def test_in_one_thread_a_poll_serves_what_has_come(address: str, sockets: Sockets) -> None:
    server = ControlServer(address, handle)
    try:
        server.poll(0.0)
        clients = [connected(sockets, address, zmq.REQ) for _ in range(3)]
        for client in clients:
            client.send(b'{"request": "status"}')
        while server.answered < 3:
            server.poll(5.0)
        assert all(json.loads(client.recv())["ok"] for client in clients)
    finally:
        server.close()


def test_a_flood_keeps_the_thread_only_so_long(address: str, sockets: Sockets) -> None:
    server = ControlServer(address, handle)
    try:
        flood = [connected(sockets, address) for _ in range(4)]
        for _ in range(MOST_AT_ONCE):
            for client in flood:
                client.send_multipart([b"", b'{"request": "status"}'], zmq.NOBLOCK)
        server.poll(5.0)
        assert 0 < server.answered <= MOST_AT_ONCE
    finally:
        server.close()


def test_clients_that_vanish_wedge_nothing(address: str) -> None:
    with answering(address, handle) as server:
        for _ in range(50):
            with Sockets() as brief:
                socket = connected(brief, address, zmq.REQ)
                socket.send(b'{"request": "status"}')
        with Sockets() as silent:  # one that asks for ever and never reads
            deaf = connected(silent, address)
            deaf.rcvhwm = 1
            for _ in range(2000):
                if deaf.poll(1000, zmq.POLLOUT):
                    deaf.send_multipart([b"", b'{"request": "status"}'])
            assert ask(address, STATUS)["ok"]
        assert ask(address, STATUS)["ok"]
    assert server.refused == 0


def test_frames_that_are_no_request(address: str, sockets: Sockets) -> None:
    with answering(address, handle) as server:
        dealer = connected(sockets, address)
        dealer.send_multipart([b"no envelope", b"{}"])
        dealer.send_multipart([b"", b'{"request": "status"}', b"more"])
        assert dealer.poll(5000)
        assert json.loads(dealer.recv_multipart()[1])["error"] == "2 frames; right would be one"
        req = connected(sockets, address, zmq.REQ)
        req.send(b"\x80\x04pickle")
        assert req.poll(5000)
        assert json.loads(req.recv())["error"].startswith("no JSON")
        assert ask(address, STATUS)["ok"]
    assert (server.answered, server.refused) == (1, 3)


def test_a_message_that_is_too_large_ends_its_connection_only(
    address: str, sockets: Sockets
) -> None:
    with answering(address, handle) as server:
        big = connected(sockets, address, zmq.REQ)
        big.send(b" " * (MOST_BYTES + 1))
        assert not big.poll(200)
        assert ask(address, STATUS)["ok"]
    assert server.refused == 0


def test_bytes_that_are_no_zeromq_at_all(address: str) -> None:
    path = address.removeprefix("ipc://")
    with answering(address, handle):
        for seed in range(60):
            with plain_socket.socket(plain_socket.AF_UNIX) as raw:
                raw.connect(path)
                raw.sendall(random.Random(seed).randbytes(500))
            assert ask(address, STATUS)["ok"], seed


def test_mutated_requests_are_answered_every_one(address: str, sockets: Sockets) -> None:
    draw = random.Random(4)
    good = b'{"request": "mark", "key": "power", "value": 1.5, "at_ps": 7}'
    count = 2000
    with answering(address, handle) as server:
        req = connected(sockets, address, zmq.REQ)
        for _ in range(count):
            text = bytearray(good)
            for _ in range(draw.randint(1, 4)):
                text[draw.randrange(len(text))] = draw.randrange(256)
            req.send(bytes(text))
            assert req.poll(5000)
            reply = json.loads(req.recv())
            assert reply["ok"] or reply["error"]
    assert server.answered + server.refused == count
    assert 0 < server.answered < server.refused


def test_the_socket_file_is_private_and_held(address: str) -> None:
    with answering(address, handle):
        path = Path(address.removeprefix("ipc://"))
        assert stat.S_IMODE(path.stat().st_mode) & 0o077 == 0
        with pytest.raises(RunBusyError):
            ControlServer(address, handle)
        assert ask(address, STATUS)["ok"]
    assert not path.exists()


def test_over_the_network_only_with_authorised_keys(tmp_path: Path) -> None:
    with pytest.raises(SettingsError, match="tagstream keys"):
        ControlServer("tcp://0.0.0.0:*", handle)
    files, strange = make_keys(tmp_path / "keys"), make_keys(tmp_path / "strange")
    (strange.public("server")).write_text(files.public("server").read_text())
    security = Security(keys=files.folder, authorised=files.authorised)
    with answering("tcp://127.0.0.1:*", handle, security) as server:
        assert ask(server.address, STATUS, files.folder)["ok"]
        with pytest.raises(TimeoutError):
            ask(server.address, STATUS, strange.folder, timeout_s=0.3)
        with pytest.raises(TimeoutError):
            ask(server.address, STATUS, None, timeout_s=0.3)
        assert ask(server.address, STATUS, files.folder)["ok"]
        numbers = server.numbers
    assert (numbers["control_answered"], numbers["control_refused"]) == (2, 0)
    assert int(numbers["control_denied"]) >= 1
