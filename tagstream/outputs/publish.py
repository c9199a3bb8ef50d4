"""Results as messages: a ZeroMQ PUB socket that tells everybody who listens, and waits for nobody.

Each message has two frames: a topic, and a JSON object with finite numbers only (null where there
is none). Whoever listens late, or too slowly, misses messages; `sequence` shows it.

All:     format "tagstream-results", version 1, sequence (0, 1, 2 ... over all topics), run (name),
         run_uuid, utc (of sending).
slice:   one for each slice of stream time, final: slice (index), begin_ps, end_ps, live_time_ps,
         state, health (both as last known),
         channels {name: {counts, rate_hz}} in this slice,
         estimates {name: {unit, spans: {span: {value, lower, upper, level, interval, counts,
         method, reason, note, raw_value, raw_lower, raw_upper}}}}.
health:  about once a second, also while no slice ends: state, health {name: number or text}.
         The last one says how the run ended.
alert:   when one is raised or cleared: raised (true or false), number (of the [[alert]] section),
         what, text, stream_ps, value, compared (the end of the interval that counts), bound.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from math import nan
from typing import Any

import zmq

from tagstream.estimates import Estimate
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.outputs.alerts import CLEARED, RAISED
from tagstream.outputs.plain_json import as_bytes
from tagstream.security import Sockets
from tagstream.security.sockets import SecuritySettings
from tagstream.units import PS_PER_S

SLICE, HEALTH, ALERT = b"slice", b"health", b"alert"  # topics
FORMAT, VERSION = "tagstream-results", 1
MOST_WAITING = 64  # messages for one listener; then it misses some
LAST_WORDS_MS = 200  # how long the end of a run waits for its last messages to leave
_TELLS = ("value", "lower", "upper", "level", "interval", "counts", "method", "reason", "note")
_RAW = ("raw_value", "raw_lower", "raw_upper")


def _utc() -> str:
    return datetime.now(UTC).isoformat(timespec="milliseconds")


@dataclass(frozen=True, slots=True)
class Sender:
    """What each message says of the run it comes from. utc: tells the time of sending."""

    run: str
    run_uuid: str
    utc: Callable[[], str] = _utc


class Publisher:
    """A sink that publishes. One thread at a time may use it.

    Raises SettingsError, InputError or RunBusyError when the address cannot be bound. address:
    where it is bound; a port that was `*` is chosen.
    """

    def __init__(
        self,
        address: str,
        sender: Sender,
        header: RunHeader,
        security: SecuritySettings | None = None,
    ) -> None:
        self._sender, self._header = sender, header
        self._sequence = 0
        self._health: dict[str, int | float | str] = {"state": "starting"}
        self._sockets = Sockets(security)
        try:
            self._socket = self._sockets.open(zmq.PUB)
            self._socket.sndhwm = MOST_WAITING
            self.address = self._sockets.bind(self._socket, address)
        except BaseException:
            self._sockets.close()
            raise

    def add_row(self, row: Row) -> None:
        """Publish a slice."""
        self._send(
            SLICE,
            {
                "slice": row.slice_index,
                "begin_ps": row.begin_ps,
                "end_ps": row.end_ps,
                "live_time_ps": row.live_time_ps,
                "channels": self._channels(row),
                "estimates": self._estimates(row),
                **self._state(),
            },
        )

    def snapshot_due(self) -> bool:
        """Never by itself: health is published along with other results."""
        return False

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Publish the health."""
        self._health = dict(snapshot.health)
        self._send(HEALTH, self._state())

    def renew(self, header: RunHeader) -> None:
        """Name what follows after another header."""
        self._header = header

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Publish an alert; other events are for the log."""
        if name in (RAISED, CLEARED):
            self._send(ALERT, {"raised": name == RAISED, "stream_ps": stream_ps, **fields})

    def close(self, snapshot: Snapshot) -> None:
        """Publish the last health, and be gone."""
        try:
            self.replace_snapshot(snapshot)
        finally:
            self._socket.close(LAST_WORDS_MS)
            self._sockets.close()

    def _state(self) -> dict[str, Any]:
        return {"state": self._health.get("state"), "health": self._health}

    def _channels(self, row: Row) -> dict[str, Any]:
        live_s = row.live_time_ps / PS_PER_S
        return {
            name: {"counts": count, "rate_hz": count / live_s if live_s else nan}
            for name, count in zip(self._header.channels, row.counts.tolist(), strict=True)
        }

    def _estimates(self, row: Row) -> dict[str, Any]:
        spans = self._header.spans
        return {
            name: {
                "unit": self._header.estimates[name],
                "spans": {s: _told(e) for s, e in zip(spans, estimates, strict=True)},
            }
            for name, estimates in row.estimates.items()
        }

    def _send(self, topic: bytes, content: dict[str, Any]) -> None:
        head = {
            "format": FORMAT,
            "version": VERSION,
            "sequence": self._sequence,
            "run": self._sender.run,
            "run_uuid": self._sender.run_uuid,
            "utc": self._sender.utc(),
        }
        self._sequence += 1
        # A PUB socket never waits: what a listener has no room for is dropped for that listener.
        self._socket.send_multipart([topic, as_bytes({**head, **content})], zmq.NOBLOCK)


def _told(estimate: Estimate) -> dict[str, Any]:
    return {key: getattr(estimate, key) for key in (*_TELLS, *_RAW)}
