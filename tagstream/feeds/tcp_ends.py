"""The two ways to a peer over TCP: to wait for one, and to call one again and again."""

from __future__ import annotations

import errno
import os
import socket
import time
from collections.abc import Callable
from contextlib import suppress
from typing import Protocol

from tagstream.errors import SettingsError
from tagstream.feeds import IDLE_S
from tagstream.feeds.readiness import ready, writable

SHORTEST_PAUSE_S, LONGEST_PAUSE_S = 0.1, 5.0
PATIENCE_S = 5.0  # for a call to be answered
# A peer whose machine is gone is noticed after about half a minute of silence.
KEEPALIVE = (("TCP_KEEPIDLE", 10), ("TCP_KEEPINTVL", 5), ("TCP_KEEPCNT", 4))


class End(Protocol):
    """A way to a peer. What it opened is closed with `close`.

    `peer`: a new connection, None when there is none after about `IDLE_S`. `refuse`: close those
    that wait for one while there is a peer already; how many. `peer` may raise OSError, whose text
    is kept. `descriptors`: where to look whether somebody is to be refused.
    """

    def peer(self) -> socket.socket | None: ...

    def refuse(self) -> int: ...

    @property
    def descriptors(self) -> list[int]: ...

    def close(self) -> None: ...


class Listening:
    """Waits for a peer at an address. Raises SettingsError when it cannot be bound.

    address: (host, port) where it is bound; another port than asked for if that was 0.
    """

    def __init__(self, address: str) -> None:
        host, port = host_and_port(address)
        try:
            family = socket.getaddrinfo(host, port, type=socket.SOCK_STREAM)[0][0]
            self._socket = socket.create_server((host, port), family=family, backlog=8)
        except OSError as error:
            raise SettingsError(
                [
                    f"[feed] listen: {address} cannot be bound: {error.strerror or error};"
                    " right would be a free port of this machine"
                ]
            ) from None
        self._socket.setblocking(False)
        self.address: tuple[str, int] = self._socket.getsockname()[:2]

    def peer(self) -> socket.socket | None:
        """As `End.peer`."""
        return self._accepted() if ready(self.descriptors, IDLE_S) else None

    def refuse(self) -> int:
        """As `End.refuse`."""
        refused = 0
        with suppress(OSError):  # such as that it is gone already
            while (other := self._accepted()) is not None:
                other.close()
                refused += 1
        return refused

    def _accepted(self) -> socket.socket | None:
        try:
            return self._socket.accept()[0]
        except BlockingIOError:
            return None

    @property
    def descriptors(self) -> list[int]:
        """As `End.descriptors`."""
        return [self._socket.fileno()]

    def close(self) -> None:
        """As `End.close`."""
        self._socket.close()


class Calling:
    """Connects to an address; after a failure it waits, longer each time."""

    def __init__(
        self,
        address: str,
        clock: Callable[[], float] = time.monotonic,
        wait: Callable[[float], None] = time.sleep,
    ) -> None:
        self._host, self._port = host_and_port(address)
        self._clock, self._wait = clock, wait
        self._pause_s, self._not_before_s = SHORTEST_PAUSE_S, clock()
        self._calling: socket.socket | None = None
        self._give_up_s = 0.0

    def peer(self) -> socket.socket | None:
        """As `End.peer`."""
        left_s = self._not_before_s - self._clock()
        if left_s > 0:
            self._wait(min(left_s, IDLE_S))
            return None
        try:
            connection = self._called()
        except OSError:
            self._hang_up()
            raise
        if connection is not None:
            self._calling, self._pause_s = None, SHORTEST_PAUSE_S
            self._not_before_s = self._clock() + self._pause_s  # however soon it is lost
        return connection

    def _called(self) -> socket.socket | None:
        """The connection once it stands. Raises OSError when it cannot be had."""
        if self._calling is None:
            self._call()
        calling = self._calling
        if calling is None or not writable(calling.fileno(), IDLE_S):
            if self._clock() >= self._give_up_s:
                raise TimeoutError(errno.ETIMEDOUT, os.strerror(errno.ETIMEDOUT))
            return None
        if problem := calling.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR):
            raise OSError(problem, os.strerror(problem))
        return calling

    def _call(self) -> None:
        found = socket.getaddrinfo(self._host, self._port, type=socket.SOCK_STREAM)[0]
        self._calling = socket.socket(*found[:3])
        self._calling.setblocking(False)
        self._give_up_s = self._clock() + PATIENCE_S
        problem = self._calling.connect_ex(found[4])
        if problem not in (0, errno.EINPROGRESS):
            raise OSError(problem, os.strerror(problem))

    def _hang_up(self) -> None:
        self.close()
        self._not_before_s = self._clock() + self._pause_s
        self._pause_s = min(2 * self._pause_s, LONGEST_PAUSE_S)

    def refuse(self) -> int:
        """As `End.refuse`: nobody calls us."""
        return 0

    @property
    def descriptors(self) -> list[int]:
        """As `End.descriptors`."""
        return []

    def close(self) -> None:
        """As `End.close`."""
        if self._calling is not None:
            self._calling.close()
            self._calling = None


def host_and_port(address: str) -> tuple[str, int]:
    """The parts of "127.0.0.1:7700" or "[::1]:7700". Raises SettingsError."""
    host, _, port = address.removeprefix("tcp://").rpartition(":")
    host = host.removeprefix("[").removesuffix("]")
    if not host or not port.isdecimal() or int(port) > 65535:
        raise SettingsError(
            [f'address: found "{address}"; right would be a host and a port, "127.0.0.1:7700"']
        )
    return host, int(port)


def keep_alive(connection: socket.socket) -> None:
    """Have the system ask now and then whether a silent peer is still there."""
    connection.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)
    for name, value in KEEPALIVE:
        if hasattr(socket, name):
            connection.setsockopt(socket.IPPROTO_TCP, getattr(socket, name), value)
