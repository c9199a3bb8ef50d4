"""Recordings as ZeroMQ messages: they parse, cover exactly, and hold all tags."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import zmq

from tagstream.errors import InputError, SettingsError, TagstreamError
from tagstream.feeds.messages import TagsMessage, parse_message
from tagstream.recording import RecordingHeader
from tagstream.security.keys import KeyFiles, make_keys
from tagstream.security.sockets import Sockets
from tagstream.sending import Portion
from tagstream.sending.messages_line import MessagesLine, Place, SessionNames
from tagstream.sending.opening import Target, open_player
from tagstream.sending.play import Conductor
from tagstream.settings.sections import Security
from tagstream.units import PS_PER_S
from tests.recording.made import piece, write
from tests.strategies import int64

UTC = "2026-01-02T03:04:05.000006+00:00"
NAMES = SessionNames("a")
FAST = Conductor(None, lambda seconds: False)


def never() -> bool:
    return False


def recording(path: Path) -> Path:
    """Three intervals of 50 ms, one lost one, and a gap; 600 tags, some out of order."""
    rng = np.random.default_rng(3)
    step = PS_PER_S // 20
    rows = []
    for number, begin in enumerate((0, step, 2 * step, 5 * step)):
        times = np.sort(rng.integers(begin, begin + step, 150))
        times[10:12] = times[[11, 10]]
        tags = [(int(t), int(t) % 3) for t in times]
        rows.append(piece(tags, (begin, begin + step), lossy=number == 2))
    return write(path, rows, header=RecordingHeader(origin_utc=UTC))


@contextmanager
def receiver(kind: int, address: str) -> Iterator[tuple[zmq.Socket[bytes], str]]:
    context: zmq.Context[zmq.Socket[bytes]] = zmq.Context()
    socket = context.socket(kind)
    socket.linger, socket.rcvtimeo = 0, 10_000
    if kind == zmq.SUB:
        socket.subscribe(b"")
        socket.connect(address)
    else:
        socket.bind(address)
    try:
        yield socket, str(socket.getsockopt_string(zmq.LAST_ENDPOINT)).rstrip("\0")
    finally:
        socket.close()
        context.term()


def in_background(function: Callable[[], None]) -> threading.Thread:
    thread = threading.Thread(target=function)
    thread.start()
    return thread


def received(socket: zmq.Socket[bytes], count: int) -> list[TagsMessage]:
    return [parse_message(socket.recv_multipart()) for _ in range(count)]


def test_a_recording_arrives_whole_as_two_sessions(tmp_path: Path) -> None:
    path = recording(tmp_path / "a.h5")
    with receiver(zmq.PULL, f"ipc://{tmp_path}/in") as (socket, address):
        player = open_player([path], Target(address, stream="b"), FAST, never)
        playing = in_background(lambda: player.play(2))
        found = received(socket, 8)
        playing.join()
    headers = [message.header for message in found]
    assert [h.sequence for h in headers] == [0, 1, 2, 3] * 2
    assert [h.lost for h in headers] == [0, 0, 1, 0] * 2
    assert {h.stream for h in headers} == {"b"}
    first, second = headers[:4], headers[4:]
    assert len({h.session for h in first}) == len({h.session for h in second}) == 1
    assert first[0].session != second[0].session
    assert {h.zero_utc for h in first} == {UTC}
    assert {h.zero_utc for h in second} == {None}  # it would be false
    for message in found:
        assert (message.ticks >= message.header.begin).all()
        assert (message.ticks < message.header.end).all()
        assert (message.inputs == message.ticks % 3).all()
    assert all(p.end <= q.begin for p, q in pairwise(first))
    assert player.sent.counts == {"messages": 8, "tags": 1200}
    assert player.sent.sessions == 2
    assert player.sent.stream_s == pytest.approx(0.4)


def test_a_publisher_waits_for_who_subscribes(tmp_path: Path) -> None:
    address = f"ipc://{tmp_path}/out"
    target = Target(address, bind=True, publish=True)
    player = open_player([recording(tmp_path / "a.h5")], target, FAST, never)
    playing = in_background(lambda: player.play(1))
    with receiver(zmq.SUB, address) as (socket, _):
        assert sum(m.header.count for m in received(socket, 4)) == 600
        playing.join()


def test_a_slow_receiver_loses_nothing_and_a_stop_is_noticed(tmp_path: Path) -> None:
    times = np.arange(100_000)
    asked = threading.Event()
    with receiver(zmq.PULL, f"ipc://{tmp_path}/in") as (socket, address):
        line = MessagesLine(Place(address), NAMES, asked.is_set)
        sent: list[Portion] = []

        def send_all() -> None:
            portions = (Portion(n, n + 1, times, times.astype(np.uint8)) for n in range(2000))
            sent.extend(p for p in portions if line.send(p))
            line.close()

        sending = in_background(send_all)
        assert [m.header.sequence for m in received(socket, 20)] == list(range(20))
        asked.set()
        sending.join()
    assert 20 <= len(sent) < 2000


def test_a_gap_without_length_is_told_by_a_missing_number(tmp_path: Path) -> None:
    nothing, none = int64([]), np.zeros(0, np.uint8)
    with receiver(zmq.PULL, f"ipc://{tmp_path}/in") as (socket, address):
        line = MessagesLine(Place(address), NAMES, never)
        assert line.send(Portion(0, 10, nothing, none, gap_before=True))
        assert line.send(Portion(10, 20, nothing, none))
        assert line.send(Portion(20, 30, nothing, none, gap_before=True))
        assert line.heartbeat(99)
        assert line.send(Portion(50, 60, nothing, none, gap_before=True))
        found = received(socket, 5)
        line.close()
    told = [(m.header.sequence, m.header.begin, m.header.end) for m in found]
    assert told == [(0, 0, 10), (1, 10, 20), (3, 20, 30), (4, 30, 30), (5, 50, 60)]


def test_keys_open_what_they_should(tmp_path: Path) -> None:
    files = make_keys(tmp_path / "keys")
    security = Security.model_validate({"keys": files.folder, "authorised": files.authorised})
    path = recording(tmp_path / "a.h5")
    with Sockets(security) as sockets:
        socket = sockets.open(zmq.PULL)
        socket.rcvtimeo = 10_000
        address = sockets.bind(socket, "tcp://127.0.0.1:*")
        target = Target(address, keys=files.folder, server_key=files.public("server"))
        player = open_player([path], target, FAST, never)
        playing = in_background(lambda: player.play(1))
        assert sum(m.header.count for m in received(socket, 4)) == 600
        playing.join()


def test_a_sender_that_binds_lets_in_whom_it_knows(tmp_path: Path) -> None:
    files = make_keys(tmp_path / "keys")
    target = Target("tcp://127.0.0.1:*", bind=True, keys=files.folder)
    security = Security.model_validate(
        {"keys": target.keys, "authorised": KeyFiles(files.folder).authorised}
    )
    line = MessagesLine(Place(target.address, bind=True, security=security), NAMES, never)
    nothing, none = int64([]), np.zeros(0, np.uint8)
    with Sockets(security) as sockets:
        socket = sockets.open(zmq.PULL)
        socket.rcvtimeo = 10_000
        sockets.connect(socket, line.address, files.public("server"))

        def send_one() -> None:
            line.send(Portion(0, 1, nothing, none))
            line.close()

        sending = in_background(send_one)
        assert received(socket, 1)[0].header.end == 1
        sending.join()


@pytest.mark.parametrize(
    ("target", "words"),
    [
        (Target("tcp://127.0.0.1:1", records=Path("a.toml")), "--records"),
        (Target("127.0.0.1:1"), "give --records"),
        (Target("-", bind=True, records=Path("a.toml")), "--bind"),
        (Target("-", publish=True, records=Path("a.toml")), "--pub"),
        (Target("127.0.0.1:1", keys=Path("keys"), records=Path("a.toml")), "--security"),
        (Target("127.0.0.1:1", server_key=Path("k"), records=Path("a.toml")), "--server-key"),
    ],
)
def test_what_does_not_go_together_is_told(target: Target, words: str) -> None:
    with pytest.raises(SettingsError, match=words):
        open_player([], target, FAST, never)


def test_an_address_that_cannot_be_used_is_told(tmp_path: Path) -> None:
    with pytest.raises(TagstreamError, match="nonsense"):
        MessagesLine(Place("nonsense://x"), NAMES, never)
    with pytest.raises(SettingsError, match="192"):
        MessagesLine(Place("tcp://192.0.2.1:5570"), NAMES, never)


def test_a_recording_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such file"):
        open_player([tmp_path / "a.h5"], Target("tcp://127.0.0.1:1"), FAST, never)
