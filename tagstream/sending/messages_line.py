"""Portions as ZeroMQ messages of tags."""

from __future__ import annotations

import time
import uuid
from collections.abc import Callable, Mapping
from contextlib import suppress
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

import numpy as np
import zmq

from tagstream.feeds.messages import Frame, TagsHeader, TagsMessage, message_frames
from tagstream.security.sockets import SecuritySettings, Sockets
from tagstream.sending import Portion

QUEUE = 4  # messages that wait on either side; a slow receiver makes the sender wait
POLL_MS = 100
LINGER_MS, STOPPED_LINGER_MS = 30_000, 1_000  # for what was sent to leave
PICOSECOND = Fraction(1)


@dataclass(frozen=True, slots=True)
class Place:
    """A ZeroMQ address, and how it is met.

    publish: to whoever subscribes, else to one that pulls. security, server_key: keys, as for
    `security.sockets.Sockets`.
    """

    address: str
    bind: bool = False
    publish: bool = False
    security: SecuritySettings | None = None
    server_key: Path | None = None


@dataclass(frozen=True, slots=True)
class SessionNames:
    """What the messages of a session say of where they come from."""

    stream: str
    zero_utc: str | None = None


class MessagesLine:
    """A line over ZeroMQ. stopped: whether to give up waiting for a receiver.

    With `publish`, nothing is sent before somebody has subscribed, and nothing is left out for a
    slow subscriber. Raises SettingsError or InputError when the address cannot be used.
    """

    def __init__(self, place: Place, names: SessionNames, stopped: Callable[[], bool]) -> None:
        self._names, self._stopped = names, stopped
        self._session = str(uuid.uuid4())
        self._sequence = self._messages = self._tags = 0
        self._end_ps: int | None = None
        self._publishes = self._waits_for_subscriber = place.publish
        self._sockets = Sockets(place.security)
        self._socket = self._sockets.open(zmq.XPUB if place.publish else zmq.PUSH)
        try:
            self.address = self._open(place)
        except BaseException:
            self._sockets.close()
            raise

    def _open(self, place: Place) -> str:
        self._socket.setsockopt(zmq.SNDHWM, QUEUE)
        self._socket.setsockopt(zmq.IMMEDIATE, 1)
        if place.publish:
            self._socket.setsockopt(zmq.XPUB_NODROP, 1)
        if place.bind:
            return self._sockets.bind(self._socket, place.address)
        self._sockets.connect(self._socket, place.address, place.server_key)
        return place.address

    def send(self, portion: Portion) -> bool:
        """As `Line.send`."""
        known = self._end_ps is None or portion.begin_ps != self._end_ps
        if portion.gap_before and not known:
            self._sequence += 1  # nothing else tells of a gap without length
        sent = self._send(portion)
        self._end_ps = portion.end_ps
        return sent

    def heartbeat(self, at_ps: int) -> bool:
        """As `Line.heartbeat`: an interval without length, at the end of what was sent."""
        at_ps = at_ps if self._end_ps is None else self._end_ps
        return self._send(Portion(at_ps, at_ps, np.zeros(0, np.int64), np.zeros(0, np.uint16)))

    def _send(self, portion: Portion) -> bool:
        header = TagsHeader(
            stream=self._names.stream,
            session=self._session,
            sequence=self._sequence,
            count=portion.times_ps.size,
            tick=PICOSECOND,
            begin=portion.begin_ps,
            end=portion.end_ps,
            lost=int(portion.lossy),
            zero_utc=self._names.zero_utc,
        )
        message = TagsMessage(header, portion.times_ps, portion.inputs)
        if not self._send_frames(message_frames(message)):
            return False
        self._sequence += 1
        self._messages += 1
        self._tags += header.count
        return True

    def _send_frames(self, frames: list[Frame]) -> bool:
        while not self._stopped():
            if self._waits_for_subscriber:
                self._waits_for_subscriber = not self._socket.poll(POLL_MS, zmq.POLLIN)
                continue
            with suppress(zmq.Again):
                self._socket.send_multipart(frames, zmq.NOBLOCK, copy=False)
                return True
            self._wait_for_room()
        return False

    def _wait_for_room(self) -> None:
        if self._publishes:
            time.sleep(0.001)  # to a poll, a publisher is ready even when a subscriber is not
        else:
            self._socket.poll(POLL_MS, zmq.POLLOUT)

    def close(self) -> None:
        """As `Line.close`."""
        self._socket.close(STOPPED_LINGER_MS if self._stopped() else LINGER_MS)
        self._sockets.close()

    @property
    def counts(self) -> Mapping[str, int]:
        """As `Line.counts`."""
        return {"messages": self._messages, "tags": self._tags}
