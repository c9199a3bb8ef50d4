"""Messages of tags over ZeroMQ as a feed."""

from __future__ import annotations

import time
from collections.abc import Generator, Iterator, Mapping
from typing import Any

import zmq

from tagstream.feeds import IDLE_S, Arrivals, ResumePoint, TimeBase
from tagstream.feeds.message_stream import SHOWN_BYTES, MessageStream
from tagstream.feeds.messages import FRAMES, MessageError, parse_message
from tagstream.feeds.sessions import Sessions
from tagstream.security.sockets import SecuritySettings, Sockets
from tagstream.settings.feeds import ZmqFeed

PATTERNS = {"pull": zmq.PULL, "sub": zmq.SUB}
POLL_MS = int(IDLE_S * 1000)


class MessagesFeed:
    """Tags that others send, in messages that say which time they cover.

    Its socket is made, used and closed in the thread that drives `pieces`. Raises SettingsError,
    InputError or RunBusyError when that cannot be done, and nothing for what a peer does.
    """

    def __init__(
        self,
        settings: ZmqFeed,
        slice_ps: int,
        security: SecuritySettings | None = None,
        resumed: ResumePoint | None = None,
    ) -> None:
        self._settings = settings
        self._sessions = Sessions(slice_ps, resumed)
        self._stream = MessageStream(self._sessions, settings.stream, resumed)
        self._sockets = Sockets(security)
        self._address = settings.address
        self._told_s = 0.0

    def pieces(self) -> Generator[Arrivals]:
        """As `LiveFeed.pieces`."""
        with self._sockets as sockets:
            socket = sockets.open(PATTERNS[self._settings.pattern])
            self._address = self._attach(sockets, socket)
            self._told_s = time.monotonic()
            while True:
                frames = _received(socket)
                yield from self._taken(frames)
                if time.monotonic() - self._told_s >= IDLE_S:
                    yield self._told(self._stream.idle())

    def _attach(self, sockets: Sockets, socket: zmq.Socket[bytes]) -> str:
        settings = self._settings
        socket.rcvhwm = settings.receive_queue
        socket.maxmsgsize = settings.max_message
        socket.rcvtimeo = POLL_MS
        if settings.pattern == "sub":
            socket.subscribe(b"")
        if settings.bind:
            return sockets.bind(socket, settings.address)
        sockets.connect(socket, settings.address, settings.server_key)
        return settings.address

    def _taken(self, frames: list[zmq.Frame]) -> Iterator[Arrivals]:
        """The pieces of a message; none of a malformed one."""
        if not frames:
            return
        arrived_s = time.monotonic()
        buffers = [frame.buffer for frame in frames]
        self._stream.received(sum(len(buffer) for buffer in buffers))
        try:
            for piece in self._stream.take(parse_message(buffers), arrived_s):
                yield self._told(piece)
        except MessageError as error:
            self._stream.bad(str(error), bytes(buffers[0][:SHOWN_BYTES]))

    def _told(self, piece: Arrivals) -> Arrivals:
        self._told_s = time.monotonic()
        return piece

    @property
    def link(self) -> Mapping[str, int | float | str]:
        """As `LiveFeed.link`."""
        sockets = self._sockets
        peers: dict[str, int | float | str] = {
            "address": self._address,
            "peers_admitted": sockets.admitted,
            "peers_denied": sockets.denied,
            "last_denied": sockets.last_denied,
        }
        return peers | self._stream.counts

    @property
    def position(self) -> dict[str, Any]:
        """As `LiveFeed.position`."""
        return self._stream.position

    @property
    def time_base(self) -> TimeBase:
        """As `Feed.time_base`; after the first message that counts."""
        return self._sessions.time_base

    @property
    def truth(self) -> dict[str, Any]:
        """As `Feed.truth`: nobody knows it."""
        return {}

    @property
    def progress(self) -> float | None:
        """As `Feed.progress`: there is no end to come."""
        return None


def _received(socket: zmq.Socket[bytes]) -> list[zmq.Frame]:
    """The frames of a message, at most one more than is right; none when nothing came in time."""
    frames: list[zmq.Frame] = []
    try:
        frame = socket.recv(copy=False)
    except zmq.Again:
        return frames
    frames.append(frame)
    while frame.more:
        frame = socket.recv(copy=False)
        if len(frames) <= FRAMES:
            frames.append(frame)
    return frames
