"""Records over TCP: peers that come, go, come again, and are refused."""

from __future__ import annotations

import socket
from collections.abc import Generator, Iterator
from contextlib import contextmanager
from typing import Any

import numpy as np
import pytest

from tagstream.errors import SettingsError
from tagstream.feeds import IDLE, Arrivals, build_live_feed
from tagstream.feeds.tcp import TcpFeed
from tagstream.feeds.tcp_ends import LONGEST_PAUSE_S, SHORTEST_PAUSE_S, Calling, host_and_port
from tagstream.settings.feeds import TcpFeed as TcpSettings
from tests.feeds.opened import tags_of
from tests.feeds.records_at_hand import (
    LAYOUT,
    SLICE_PS,
    data,
    idle_until,
    tag,
    tags_until,
    until,
)

Pieces = Generator[Arrivals]


def tcp(**changes: Any) -> TcpFeed:
    settings = TcpSettings.model_validate(LAYOUT | {"kind": "tcp"} | changes)
    feed = build_live_feed(settings, SLICE_PS)
    assert isinstance(feed, TcpFeed)
    return feed


@contextmanager
def listening() -> Iterator[tuple[TcpFeed, Pieces, tuple[str, int]]]:
    feed = tcp(listen="127.0.0.1:0")
    pieces = feed.pieces()
    assert next(pieces) is IDLE
    assert feed.address is not None
    try:
        yield feed, pieces, feed.address
    finally:
        pieces.close()


def test_a_peer_may_go_away_and_come_again() -> None:
    with listening() as (feed, pieces, address):
        with socket.create_connection(address) as peer:
            peer.sendall(data(tag(5), tag(6)) + b"cut")
            first = tags_until(pieces, 2)
            assert feed.link["connected"] == 1
            assert feed.link["peer"] == "{}:{}".format(*peer.getsockname())
        idle_until(pieces, feed, connected=0)
        with socket.create_connection(address) as peer:
            peer.sendall(data(tag(1), tag(3)))
            second = tags_until(pieces, 2)
        times = [time for time, _ in tags_of(first + second)]
        assert times[:2] == [5_000, 6_000]
        assert times[2] > 6_000
        assert (times[2] - 6_000) % SLICE_PS == 0
        assert times[3] == times[2] + 2_000
        assert [p.gap_before for p in second] == [True]
        idle_until(pieces, feed, connects=2, disconnects=2, records_cut=1, bytes_received=19)


def test_a_second_peer_is_refused_while_there_is_one() -> None:
    with listening() as (feed, pieces, address), socket.create_connection(address) as peer:
        idle_until(pieces, feed, connected=1)
        with socket.create_connection(address) as other:
            idle_until(pieces, feed, peers_refused=1)
            assert other.recv(1) == b""
        peer.sendall(data(tag(5)))
        assert tags_of(tags_until(pieces, 1)) == [(5_000, 1)]


def test_a_peer_that_comes_again_at_once_is_not_refused() -> None:
    """Both what it sent before and its new connection wait when the feed looks."""
    with listening() as (feed, pieces, address):
        for _ in range(2):
            with socket.create_connection(address) as peer:
                peer.sendall(data(tag(5)))
        tags_until(pieces, 2)
        assert (feed.link["peers_refused"], feed.link["connects"]) == (0, 2)


def test_a_peer_that_resets_the_connection_is_gone() -> None:
    with listening() as (feed, pieces, address):
        peer = socket.create_connection(address)
        idle_until(pieces, feed, connected=1)
        linger = np.array([1, 0], np.int32).tobytes()  # closing now resets
        peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, linger)
        peer.close()
        idle_until(pieces, feed, disconnects=1)
        assert feed.link["last_error"]
        with socket.create_connection(address) as peer:
            peer.sendall(data(tag(5)))
            tags_until(pieces, 1)


def test_garbage_is_tags_like_any_other_and_ends_nothing() -> None:
    garbage = np.random.default_rng(1).bytes(100_003)
    with listening() as (feed, pieces, address):
        with socket.create_connection(address) as peer:
            peer.sendall(garbage)
        idle_until(pieces, feed, disconnects=1, records_cut=1, bytes_received=100_003)


def test_much_comes_through_whole() -> None:
    numbers = np.arange(1_000_003, dtype=np.uint32) % 2**20
    with listening() as (feed, pieces, address), socket.create_connection(address) as peer:
        peer.setblocking(False)
        rest, found = memoryview(numbers.tobytes()), 0
        while found < numbers.size:
            if rest:
                rest = rest[peer.send(rest) :] if _takes_more(peer) else rest
            found += next(pieces).times_ps.size
        assert found == numbers.size
        assert feed.link["bytes_received"] == 4 * numbers.size


def _takes_more(peer: socket.socket) -> bool:
    from tagstream.feeds.readiness import writable

    return writable(peer.fileno(), 0.0)


def test_a_feed_may_call_its_peer_again_and_again() -> None:
    with socket.create_server(("127.0.0.1", 0)) as server:
        address = f"127.0.0.1:{server.getsockname()[1]}"
        feed = tcp(connect=address)
        pieces = feed.pieces()
        for number in range(2):
            next(pieces)
            peer, _ = server.accept()
            with peer:
                peer.sendall(data(tag(5)))
                (piece,) = tags_until(pieces, 1)
            assert piece.gap_before == (number == 1)
            idle_until(pieces, feed, disconnects=number + 1)
        pieces.close()


def test_a_peer_that_is_not_there_is_called_less_and_less_often() -> None:
    with socket.create_server(("127.0.0.1", 0)) as server:
        address = f"127.0.0.1:{server.getsockname()[1]}"
    now = [0.0]
    waits: list[float] = []

    def wait(seconds: float) -> None:
        waits.append(seconds)
        now[0] += seconds

    calling = Calling(address, lambda: now[0], wait)
    refused: list[float] = []
    while len(refused) < 9:
        try:
            assert calling.peer() is None
        except OSError:
            refused.append(now[0])
    pauses = np.diff(refused)
    assert pauses[0] == pytest.approx(SHORTEST_PAUSE_S)
    np.testing.assert_allclose(pauses[1:5] / pauses[:4], 2)
    assert pauses[-1] == pytest.approx(LONGEST_PAUSE_S)
    assert max(waits) <= 0.1


def test_a_failed_call_is_counted_with_its_reason() -> None:
    with socket.create_server(("127.0.0.1", 0)) as server:
        address = f"127.0.0.1:{server.getsockname()[1]}"
    feed = tcp(connect=address)
    pieces = feed.pieces()
    idle_until(pieces, feed, failed_connects=1)
    assert "refused" in str(feed.link["last_error"])
    pieces.close()


def test_an_address_that_is_taken_is_told() -> None:
    with listening() as (_, _, address):
        feed = tcp(listen="{}:{}".format(*address))
        with pytest.raises(SettingsError, match="cannot be bound"):
            next(feed.pieces())


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        ("127.0.0.1:7700", ("127.0.0.1", 7700)),
        ("[::1]:1", ("::1", 1)),
        ("tcp://localhost:80", ("localhost", 80)),
    ],
)
def test_addresses(text: str, parts: tuple[str, int]) -> None:
    assert host_and_port(text) == parts


@pytest.mark.parametrize("text", ["127.0.0.1", ":7700", "localhost:x", "localhost:70000"])
def test_what_is_no_address_is_told(text: str) -> None:
    with pytest.raises(SettingsError, match="a host and a port"):
        host_and_port(text)


def test_closing_frees_the_address() -> None:
    with listening() as (_, pieces, address):
        until(pieces, lambda _: True)
    with socket.create_server(address):
        pass
