"""What those who listen are told."""

from __future__ import annotations

import json
import time
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import zmq

from tagstream.errors import RunBusyError, SettingsError
from tagstream.outputs.alerts import Alerts
from tagstream.outputs.publish import MOST_WAITING, Publisher, Sender
from tagstream.security import KeyFiles, Sockets, make_keys
from tagstream.settings.sections import Security
from tests.fakes_outputs import SLICE_PS, SPANS, make_header, make_row, make_snapshot
from tests.outputs.test_alerts import alert

WAIT_MS = 5000
SENDER = Sender("emitter-3-0001", "uuid", lambda: "2026-12-01T10:00:00.000+00:00")


def listen(sockets: Sockets, publisher: Publisher, topic: bytes = b"", **keys: Any) -> Any:
    """A socket that hears the publisher from now on."""
    socket = sockets.open(zmq.SUB)
    socket.setsockopt(zmq.SUBSCRIBE, topic)
    socket.setsockopt(zmq.SUBSCRIBE, b"wake")
    sockets.connect(socket, publisher.address, **keys)
    until = time.monotonic() + WAIT_MS / 1000
    while not socket.poll(10):  # a SUB socket that just connected hears nothing yet
        publisher._socket.send(b"wake")
        assert time.monotonic() < until
    while socket.poll(50):
        socket.recv()
    return socket


def heard(socket: Any) -> tuple[str, dict[str, Any]]:
    assert socket.poll(WAIT_MS)
    topic, text = socket.recv_multipart()

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} is no JSON")

    return topic.decode(), json.loads(text, parse_constant=refuse)


@pytest.fixture
def address(tmp_path: Path) -> str:
    return f"ipc://{tmp_path}/p"


@pytest.fixture
def publisher(address: str) -> Iterator[Publisher]:
    made = Publisher(address, SENDER, make_header())
    yield made
    made._sockets.close()


@pytest.fixture
def sockets() -> Iterator[Sockets]:
    with Sockets() as made:
        yield made


def test_a_slice_as_its_schema_says(publisher: Publisher, sockets: Sockets) -> None:
    socket = listen(sockets, publisher)
    publisher.replace_snapshot(make_snapshot())
    publisher.add_row(make_row(3))
    assert heard(socket)[0] == "health"
    topic, told = heard(socket)
    assert topic == "slice"
    head = {"format": "tagstream-results", "version": 1, "sequence": 1, "run": "emitter-3-0001"}
    place = {"slice": 3, "begin_ps": 3 * SLICE_PS, "end_ps": 4 * SLICE_PS, "state": "running"}
    assert {**told, **head, **place, "run_uuid": "uuid"} == told
    assert told["utc"] == "2026-12-01T10:00:00.000+00:00"
    live_s = told["live_time_ps"] / 1e12
    assert told["channels"]["arm_b"] == {"counts": 31, "rate_hz": 31 / live_s}
    g2 = told["estimates"]["g2_zero"]
    assert g2["unit"] == "1"
    assert list(g2["spans"]) == list(SPANS)
    keys = "value lower upper level interval counts method reason note raw_value raw_lower"
    assert set(g2["spans"]["run"]) == {*keys.split(), "raw_upper"}
    assert g2["spans"]["run"]["lower"] == 1 / 11
    assert g2["spans"]["10 s"]["value"] is None
    assert g2["spans"]["10 s"]["reason"] == "too few counts"
    assert told["health"]["gap_time_ps"] == 1_500_000_000_000


def test_no_live_time_is_no_rate(publisher: Publisher, sockets: Sockets) -> None:
    socket = listen(sockets, publisher, b"slice")
    publisher.add_row(replace(make_row(0), live_time_ps=0))
    told = heard(socket)[1]
    assert told["channels"]["arm_a"]["rate_hz"] is None
    assert told["state"] == "starting"


def test_alerts_are_messages_of_their_own(publisher: Publisher, sockets: Sockets) -> None:
    socket = listen(sockets, publisher, b"alert")
    alerts = Alerts([alert(span="run", above=0.05)], SPANS, SLICE_PS)
    (change,) = alerts.update(make_row(0))
    publisher.event("gap", 5, gaps=1)
    publisher.event(change.event, change.stream_ps, **change.fields)
    topic, told = heard(socket)
    assert (topic, told["sequence"], told["raised"], told["number"]) == ("alert", 0, True, 1)
    assert (told["bound"], told["compared"], told["stream_ps"]) == (0.05, 1 / 11, SLICE_PS)


def test_the_last_message_says_how_the_run_ended(address: str, sockets: Sockets) -> None:
    publisher = Publisher(address, SENDER, make_header())
    socket = listen(sockets, publisher)
    ended = replace(make_snapshot(), health={"state": "stopped", "odd": np.float64("inf")})
    publisher.close(ended)
    topic, told = heard(socket)
    assert (topic, told["state"], told["health"]["odd"]) == ("health", "stopped", None)


def test_another_header_names_what_follows(publisher: Publisher, sockets: Sockets) -> None:
    socket = listen(sockets, publisher)
    publisher.renew(make_header(estimates={"g2_zero": "one", "rate_a": "Hz"}))
    publisher.add_row(make_row(0))
    assert heard(socket)[1]["estimates"]["g2_zero"]["unit"] == "one"


def test_one_who_does_not_read_holds_up_nobody(publisher: Publisher, sockets: Sockets) -> None:
    socket = sockets.open(zmq.SUB)
    socket.rcvhwm = 1
    socket.setsockopt(zmq.SUBSCRIBE, b"")
    sockets.connect(socket, publisher.address)
    publisher._socket.send(b"wake")
    many = 100 * MOST_WAITING
    for index in range(many):  # far beyond what all buffers together hold
        publisher.add_row(make_row(index))
    assert publisher._sequence == many


def test_two_cannot_publish_at_one_address(publisher: Publisher, address: str) -> None:
    with pytest.raises(RunBusyError):
        Publisher(address, SENDER, make_header())


def test_over_the_network_only_with_keys(tmp_path: Path) -> None:
    with pytest.raises(SettingsError, match="tagstream keys"):
        Publisher("tcp://0.0.0.0:*", SENDER, make_header())
    files = make_keys(tmp_path / "keys")
    security = Security(keys=files.folder, authorised=files.authorised)
    publisher = Publisher("tcp://127.0.0.1:*", SENDER, make_header(), security)
    with Sockets(security) as own, Sockets() as other:
        stranger = other.open(zmq.SUB)
        stranger.setsockopt(zmq.SUBSCRIBE, b"")
        other.connect(stranger, publisher.address)
        socket = listen(own, publisher, server_key=KeyFiles(files.folder).public("server"))
        publisher.add_row(make_row(0))
        assert heard(socket)[0] == "slice"
        assert not stranger.poll(200)
        publisher.close(make_snapshot())
