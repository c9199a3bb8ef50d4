"""Portions as described records, over TCP or to standard output."""

from __future__ import annotations

import os
import socket
from collections.abc import Callable, Mapping
from typing import Protocol

import numpy as np

from tagstream.errors import SettingsError, TagstreamError
from tagstream.feeds.readiness import writable
from tagstream.feeds.tcp_ends import Calling, Listening
from tagstream.sending import Portion
from tagstream.sending.encoding import RecordEncoder

LOOK_S = 0.1  # how late a stop may be noticed


class Outlet(Protocol):
    """Where bytes go. `write` returns False when it gave up because a stop was asked for."""

    def write(self, data: bytes) -> bool: ...

    def close(self) -> None: ...


class RecordsLine:
    """A line of records. Nothing is sent in silence: records tell of tags alone.

    Tags of lossy intervals, and those outside of their interval, cannot be told as what they are;
    they are left out and counted. So are gaps where the layout has no marker for them.
    """

    def __init__(self, outlet: Outlet, encoder: RecordEncoder) -> None:
        self._outlet, self._encoder = outlet, encoder
        self._tags = self._left_out = self._gaps_untold = 0
        self._end_ps: int | None = None
        self._gap = False

    def send(self, portion: Portion) -> bool:
        """As `Line.send`."""
        begins = self._end_ps is None
        self._gap |= not begins and (portion.gap_before or portion.begin_ps != self._end_ps)
        self._end_ps, times = portion.end_ps, portion.times_ps
        inside = (times >= portion.begin_ps) & (times < portion.end_ps)
        inside &= not portion.lossy
        kept = int(inside.sum())
        self._left_out += times.size - kept
        self._gap |= portion.lossy
        if kept == 0:
            return True
        order = np.argsort(times[inside], kind="stable")
        data = self._encoder.encode(times[inside][order], portion.inputs[inside][order])
        if self._gap:
            told = self._encoder.gap()
            self._gaps_untold += not told
            data, self._gap = told + data, False
        self._tags += kept
        return self._outlet.write(data)

    def heartbeat(self, at_ps: int) -> bool:
        """As `Line.heartbeat`: records have none."""
        return True

    def close(self) -> None:
        """As `Line.close`."""
        self._outlet.close()

    @property
    def counts(self) -> Mapping[str, int]:
        """As `Line.counts`."""
        counts = {"tags": self._tags, "left_out": self._left_out}
        return counts | {"gaps_untold": self._gaps_untold}


class StandardOutput:
    """Standard output, or another descriptor."""

    def __init__(self, stopped: Callable[[], bool], descriptor: int = 1) -> None:
        self._stopped, self._descriptor = stopped, descriptor
        if os.isatty(descriptor):
            raise SettingsError(
                ["-: standard output is a terminal; right would be a pipe or a file"]
            )

    def write(self, data: bytes) -> bool:
        """As `Outlet.write`. Raises BrokenPipeError when the reader has gone."""
        rest = memoryview(data)
        while rest and not self._stopped():
            if writable(self._descriptor, LOOK_S):
                rest = rest[os.write(self._descriptor, rest[:4096]) :]  # never blocks a pipe
        return not rest

    def close(self) -> None:
        """As `Outlet.close`: it is not ours to close."""


class TcpOutlet:
    """One peer over TCP: called at an address, or waited for there.

    Waits for the peer at the first `write`, so that a receiver may be started later.
    """

    def __init__(self, address: str, bind: bool, stopped: Callable[[], bool]) -> None:
        self._address, self._stopped = address, stopped
        self._end = Listening(address) if bind else Calling(address)
        self._peer: socket.socket | None = None

    @property
    def address(self) -> str:
        """Where it listens, or what it calls."""
        if isinstance(self._end, Listening):
            return "{}:{}".format(*self._end.address)
        return self._address

    def write(self, data: bytes) -> bool:
        """As `Outlet.write`. Raises TagstreamError when the peer is gone."""
        while self._peer is None:
            if self._stopped():
                return False
            self._meet()
        rest = memoryview(data)
        try:
            while rest and not self._stopped():
                if writable(self._peer.fileno(), LOOK_S):
                    rest = rest[self._peer.send(rest) :]
        except OSError as error:
            raise TagstreamError(
                f"{self._address}: the peer is gone ({error.strerror}); it may have refused a"
                " second sender, or was stopped"
            ) from None
        return not rest

    def _meet(self) -> None:
        try:
            peer = self._end.peer()
        except OSError:  # not there yet: called again after a pause
            return
        if peer is not None:
            peer.setblocking(False)
            self._peer = peer

    def close(self) -> None:
        """As `Outlet.close`: what was sent is delivered by the system."""
        if self._peer is not None:
            self._peer.close()
        self._end.close()
