"""Described records over TCP: from one peer at a time, which may go away and come again.

Raw TCP has no authentication: whoever reaches the address can send tags.
"""

from __future__ import annotations

import socket
from collections.abc import Callable, Generator, Iterator
from time import monotonic
from typing import Any

from tagstream.feeds import IDLE, Arrivals, ResumePoint
from tagstream.feeds.live_records import LiveRecordsFeed, Surroundings
from tagstream.feeds.readiness import leaving, ready
from tagstream.feeds.tcp_ends import Calling, End, Listening, keep_alive
from tagstream.settings.feeds import TcpFeed as TcpSettings


class TcpFeed(LiveRecordsFeed):
    """Records from a peer that connects to `listen`, or that is called at `connect`.

    Each connection is a session. address: where it listens, once `pieces` was begun.
    `pieces` raises SettingsError when it cannot listen there.
    """

    def __init__(
        self,
        settings: TcpSettings,
        slice_ps: int,
        security: Any = None,
        resumed: ResumePoint | None = None,
        clock: Callable[[], float] = monotonic,
    ) -> None:
        super().__init__(settings, Surroundings(slice_ps, resumed, clock))
        self._settings, self._clock = settings, clock
        self.address: tuple[str, int] | None = None
        self._counts |= {"connects": 0, "disconnects": 0, "failed_connects": 0, "peers_refused": 0}
        self._counts |= {"connected": 0, "peer": "", "last_error": ""}

    def pieces(self) -> Generator[Arrivals]:
        """As `Feed.pieces`."""
        end = self._end()
        try:
            while True:
                peer = self._peer(end)
                if peer is None:
                    yield IDLE
                    continue
                with peer:
                    yield from self._pieces_of(peer, end)
                yield from self._session_ended()
        finally:
            end.close()

    def _end(self) -> End:
        if self._settings.connect is not None:
            return Calling(self._settings.connect, self._clock)
        listening = Listening(self._settings.listen or "")
        self.address = listening.address
        return listening

    def _peer(self, end: End) -> socket.socket | None:
        """A peer that is there, if there is one; a failure is counted."""
        peer = None
        try:
            peer = end.peer()
            if peer is not None:
                self._meet(peer)
            return peer
        except OSError as error:
            self._count("failed_connects")
            self._counts["last_error"] = error.strerror or str(error)
            if peer is not None:
                peer.close()
            return None

    def _meet(self, peer: socket.socket) -> None:
        peer.setblocking(False)
        keep_alive(peer)
        host, port = peer.getpeername()[:2]
        self._count("connects")
        self._counts |= {"connected": 1, "peer": f"{host}:{port}"}

    def _pieces_of(self, peer: socket.socket, end: End) -> Iterator[Arrivals]:
        """What a peer sends, until it goes away."""
        records, descriptor = self._records, peer.fileno()
        while True:
            events = ready([descriptor, *end.descriptors], self._patience_s)
            own = events.pop(descriptor, 0)
            if events and not leaving(own):  # who comes while the peer leaves may be its next self
                self._count("peers_refused", end.refuse())
            if own:
                if not self._read(peer):
                    return
                if records.due_s > 0:
                    continue
            yield from records.due_pieces()

    def _read(self, peer: socket.socket) -> bool:
        """Take what is there; False when the peer is gone."""
        try:
            count = peer.recv_into(self._records.room)
        except BlockingIOError:
            return True
        except OSError as error:
            self._counts["last_error"] = error.strerror or str(error)
            count = 0
        if count:
            self._received(count)
            return True
        self._count("disconnects")
        self._counts["connected"] = 0
        return False
