"""Messages over real sockets of this machine."""

from __future__ import annotations

import random
from collections.abc import Callable, Generator, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
import zmq

from tagstream.errors import InputError
from tagstream.feeds import IDLE, Arrivals, build_live_feed
from tagstream.feeds.messages import Frame, message_frames
from tagstream.feeds.messages_feed import MessagesFeed
from tagstream.security import Sockets, make_keys
from tagstream.settings.feeds import ZmqFeed
from tagstream.settings.sections import Security
from tests.feeds.messages_at_hand import GOOD, message, mutated
from tests.feeds.opened import tags_of

SLICE = 1000
MUTATED_MESSAGES = 10_000
ENOUGH = 200  # pieces to wait for; an idle one takes a tenth of a second

Pieces = Generator[Arrivals]


def until(pieces: Pieces, found: Callable[[list[Arrivals]], bool]) -> list[Arrivals]:
    """Pieces until they are enough, without the idle ones."""
    got: list[Arrivals] = []
    for _ in range(ENOUGH):
        if found(got):
            return got
        piece = next(pieces)
        got += [] if piece is IDLE else [piece]
    raise AssertionError(f"waited in vain; got {got}")


@contextmanager
def opened(**table: Any) -> Iterator[tuple[MessagesFeed, Pieces]]:
    """A bound feed that was heard once, so that its socket is there."""
    security = table.pop("security", None)
    table = {"kind": "zmq", "address": "tcp://127.0.0.1:*", "bind": True} | table
    settings = ZmqFeed.model_validate(table)
    feed = build_live_feed(settings, SLICE, security)
    assert isinstance(feed, MessagesFeed)
    pieces = feed.pieces()
    try:
        assert next(pieces) is IDLE
        yield feed, pieces
    finally:
        pieces.close()


@contextmanager
def sending(feed: MessagesFeed, kind: int = zmq.PUSH) -> Iterator[zmq.Socket[bytes]]:
    with Sockets() as sockets:
        socket = sockets.open(kind)
        sockets.connect(socket, str(feed.link["address"]))
        yield socket


def has_tags(got: list[Arrivals]) -> bool:
    return bool(tags_of(got))


def test_tags_that_are_pushed_arrive_and_the_socket_is_closed_in_the_end(tmp_path: Path) -> None:
    path = tmp_path / "tags"
    with opened(address=f"ipc://{path}") as (feed, pieces), sending(feed) as socket:
        assert path.is_socket()
        socket.send_multipart(message_frames(message(0, 5000, 5010, [(5001, 3)])))
        got = until(pieces, has_tags)
        assert tags_of(got) == [(1, 3)]
        assert got[0].arrived_s is not None
        assert feed.time_base.origin_ticks == 5000
        assert feed.position["sequence"] == 1
        assert (feed.truth, feed.progress) == ({}, None)
    assert not path.exists()


def test_published_tags_arrive_where_the_feed_connects() -> None:
    with Sockets() as sockets:
        socket = sockets.open(zmq.XPUB)
        address = sockets.bind(socket, "tcp://127.0.0.1:*")
        with opened(address=address, pattern="sub", bind=False) as (_, pieces):
            while not socket.poll(0):  # until the subscription is there
                next(pieces)
            socket.send_multipart(message_frames(message(0, 0, 10, [(1, 3)])))
            assert tags_of(until(pieces, has_tags)) == [(1, 3)]


@pytest.mark.parametrize(
    "frames",
    [
        [b"garbage"],
        [b""],
        [b"x"] * 1000,
        [b"{}", b"", b""],
        [*message_frames(message(0, 0, 9)), b"more"],
    ],
    ids=["garbage", "empty", "many frames", "no header", "one frame more"],
)
def test_what_is_malformed_is_counted_and_the_next_message_is_read(frames: list[Frame]) -> None:
    with opened() as (feed, pieces), sending(feed) as socket:
        socket.send_multipart(frames)
        socket.send_multipart(message_frames(message(0, 0, 10, [(1, 3)])))
        assert tags_of(until(pieces, has_tags)) == [(1, 3)]
        assert (feed.link["malformed"], feed.link["messages"]) == (1, 2)
        assert feed.link["last_error_bytes"] == bytes(frames[0][:64]).hex(" ")


def test_a_message_that_is_too_large_costs_its_sender_the_line_and_is_a_gap() -> None:
    with opened(max_message="1 kB") as (feed, pieces), sending(feed) as socket:
        socket.send_multipart(message_frames(message(0, 0, 10, [(1, 3)])))
        until(pieces, has_tags)
        socket.send_multipart(message_frames(message(1, 10, 20, [(11, 3)] * 1000)))
        for number in range(2, ENOUGH):  # until the line is there again
            begin = 10 * number
            socket.send_multipart(message_frames(message(number, begin, begin + 10, [(begin, 3)])))
            piece = next(pieces)
            if piece is not IDLE:
                break
        assert piece.gap_before
        missing = feed.link["sequence_missing"]
        assert isinstance(missing, int)
        assert missing >= 1


def test_tags_of_others_are_told_while_nothing_else_comes() -> None:
    with opened(stream="lab") as (feed, pieces), sending(feed) as socket:
        socket.send_multipart(message_frames(message(0, 0, 9, [(1, 1)] * 3, stream="other")))
        (told,) = until(pieces, bool)
        assert told.dropped == {"foreign_stream": 3}
        assert (told.begin_ps, told.gap_before) == (None, False)


def test_an_address_that_is_taken_is_told() -> None:
    with opened() as (feed, _):
        settings = ZmqFeed(kind="zmq", address=str(feed.link["address"]), bind=True)
        with pytest.raises(InputError, match="another process uses it"):
            next(MessagesFeed(settings, SLICE).pieces())


def test_only_an_authorised_key_gets_its_tags_in(tmp_path: Path) -> None:
    files, other = make_keys(tmp_path / "ours"), make_keys(tmp_path / "others")
    bound = Security(keys=files.folder, authorised=files.authorised)
    with opened(security=bound) as (feed, pieces), Sockets(Security(keys=other.folder)) as strange:
        address, server = str(feed.link["address"]), files.public("server")
        stranger = strange.open(zmq.PUSH)
        strange.connect(stranger, address, server)
        stranger.send_multipart(message_frames(message(0, 0, 10, [(1, 66)])))
        until(pieces, lambda _: feed.link["peers_denied"] != 0)
        with Sockets(Security(keys=files.folder)) as known:
            friend = known.open(zmq.PUSH)
            known.connect(friend, address, server)
            friend.send_multipart(message_frames(message(0, 0, 10, [(1, 3)])))
            assert tags_of(until(pieces, has_tags)) == [(1, 3)]
        assert (feed.link["peers_admitted"], feed.link["messages"]) == (1, 1)
        assert str(feed.link["last_denied"]).startswith("127.0.0.1 ")


def test_ten_thousand_mutated_messages_over_a_socket_are_survived() -> None:
    chance = random.Random(5)
    good = [bytes(frame) for frame in message_frames(GOOD)]
    last = message(0, 0, 10, [(1, 77)], session="the last start")
    with opened(stream="lab") as (feed, pieces), Sockets() as sockets:
        socket = sockets.open(zmq.PUSH)
        socket.sndhwm = 0
        sockets.connect(socket, str(feed.link["address"]))
        for _ in range(MUTATED_MESSAGES):
            socket.send_multipart(mutated(good, chance), copy=True)
        socket.send_multipart(message_frames(last))
        seen = 0
        for piece in pieces:
            seen += piece.times_ps.size + sum(piece.dropped.values())
            if 77 in piece.inputs:
                break
        assert feed.link["messages"] == MUTATED_MESSAGES + 1
        malformed = feed.link["malformed"]
        assert isinstance(malformed, int)
        assert MUTATED_MESSAGES // 2 < malformed < MUTATED_MESSAGES
        assert seen == 2 * (MUTATED_MESSAGES - malformed) + 1
