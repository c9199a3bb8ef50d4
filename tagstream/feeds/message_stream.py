"""Messages of tags in turn: what follows from sequence numbers, sessions and intervals; no sockets.

A message counts when it is of the right stream, in its turn, and covers time that nothing covered
before. The tags of others are let go by reason, and what is missing becomes a gap.
"""

from __future__ import annotations

from collections import Counter, deque
from collections.abc import Iterator, Mapping
from dataclasses import replace
from datetime import UTC, datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.feeds import IDLE, PIECE_TAGS, Arrivals, ResumePoint
from tagstream.feeds.messages import FORMAT, MessageError, TagsHeader, TagsMessage
from tagstream.feeds.sessions import Sessions, SessionStart

FORMER_SESSIONS = 64  # remembered, to know their stragglers
HOLES = 64  # ranges of missing messages remembered, to tell late ones from repeated ones
SHOWN_BYTES = 64  # of the last bad message

_COUNTS = (
    *("messages", "bytes_received", "malformed", "sessions"),
    *("sequence_missing", "sequence_repeated", "sequence_out_of_order"),
    *("foreign_messages", "overlapping", "lost_tags"),
)


class MessageStream:
    """Messages to pieces of one stream.

    stream: its name; None: that of the first message. resumed: where an earlier run had come to.
    """

    def __init__(
        self, sessions: Sessions, stream: str | None = None, resumed: ResumePoint | None = None
    ) -> None:
        position: Mapping[str, Any] = {} if resumed is None else resumed.position
        self._sessions = sessions
        self._stream = stream or position.get("stream")
        self._session: SessionStart | None = None
        self._next: int | None = None  # the sequence number that is due
        self._due_then: tuple[Any, Any] = (position.get("session"), position.get("sequence"))
        self._former: deque[str] = deque(maxlen=FORMER_SESSIONS)
        self._holes: deque[range] = deque(maxlen=HOLES)
        self._gap = resumed is not None
        self._dropped: Counter[str] = Counter()
        self._counts: Counter[str] = Counter(dict.fromkeys(_COUNTS, 0))
        self._last_error: dict[str, int | str] = {}

    @property
    def counts(self) -> dict[str, int | float | str]:
        """What came over the line, by name."""
        texts: dict[str, int | float | str] = {}
        if self._stream is not None:
            texts["stream"] = self._stream
        if self._session is not None:
            texts["session"] = str(self._session.name)
        return {**self._counts, **texts, **self._last_error}

    @property
    def position(self) -> dict[str, Any]:
        """As `LiveFeed.position`."""
        if self._session is None:
            return {}
        return {"stream": self._stream, "sequence": self._next, **self._sessions.position}

    def received(self, size: int) -> None:
        """A message of `size` bytes came, whatever is in it."""
        self._counts["messages"] += 1
        self._counts["bytes_received"] += size

    def bad(self, reason: str, first_bytes: bytes) -> None:
        """A message was malformed; count it and remember what it looked like."""
        self._counts["malformed"] += 1
        self._last_error = {
            "last_error": reason,
            "last_error_utc": datetime.now(UTC).isoformat(timespec="milliseconds"),
            "last_error_bytes": first_bytes[:SHOWN_BYTES].hex(" "),
            "last_error_count": self._counts["malformed"],
        }

    def take(self, message: TagsMessage, arrived_s: float) -> Iterator[Arrivals]:
        """The pieces of a message that counts; none of another one.

        Raises MessageError, before anything else, for one that contradicts its session.
        """
        header = message.header
        if not (self._is_ours(header) and self._is_in_turn(header)):
            return
        begin, end = self._sessions.to_one_ps(header.begin), self._sessions.to_one_ps(header.end)
        covered = self._sessions.reached_ps
        if covered is not None and begin < covered:
            self._drop("overlapping", "overlap", header)
            self._gap = True
            return
        self._gap |= covered is not None and begin != covered
        self._sessions.reached(end)
        self._counts["lost_tags"] += header.lost
        lossy = header.lost > 0
        whole = Arrivals(message.ticks, message.inputs, begin, end, lossy=lossy)
        yield from self._pieces(replace(whole, arrived_s=arrived_s))

    def idle(self) -> Arrivals:
        """What there is to say while nothing that counts arrives."""
        if not self._dropped:
            return IDLE
        return replace(IDLE, dropped=self._take_dropped())

    def _is_ours(self, header: TagsHeader) -> bool:
        if self._stream is None:
            self._stream = header.stream
        if header.stream == self._stream:
            return True
        self._drop("foreign_messages", "foreign_stream", header)
        return False

    def _is_in_turn(self, header: TagsHeader) -> bool:
        """Whether a message is the next one or a later one of the present session."""
        if header.session in self._former:
            self._drop("sequence_out_of_order", "repeated", header)
            return False
        if self._session is None or header.session != self._session.name:
            self._begin(header)
        elif (header.tick, header.zero_utc) != (self._session.tick, self._session.zero_utc):
            raise MessageError(f"tick or zero_utc of {FORMAT} changed within a session")
        due = header.sequence if self._next is None else self._next
        if header.sequence < due:
            late = any(header.sequence in hole for hole in self._holes)
            name = "sequence_out_of_order" if late else "sequence_repeated"
            self._drop(name, "repeated", header)
            return False
        if header.sequence > due:
            self._counts["sequence_missing"] += header.sequence - due
            self._holes.append(range(due, header.sequence))
            self._gap = True
        self._next = header.sequence + 1
        return True

    def _begin(self, header: TagsHeader) -> None:
        """A session begins: the first of the sender, or it was restarted."""
        start = SessionStart(header.tick, header.begin, header.zero_utc, header.session)
        self._sessions.begin(start)
        self._counts["sessions"] += 1
        self._holes.clear()
        self._next = None
        if self._session is not None:
            self._former.append(str(self._session.name))
            self._next, self._gap = 0, True
        elif self._due_then[0] == header.session:
            self._next = self._due_then[1]
        self._session = start

    def _pieces(self, whole: Arrivals) -> Iterator[Arrivals]:
        """A message in pieces of bounded size, its times in stream time."""
        size = whole.times_ps.size
        for start in range(0, max(size, 1), PIECE_TAGS):
            part = slice(start, start + PIECE_TAGS)
            yield replace(
                whole,
                times_ps=self._sessions.given_up_to_ps(whole.times_ps[part]),
                inputs=narrowed(whole.inputs[part]),
                complete=start + PIECE_TAGS >= size,
                gap_before=self._gap,
                dropped=self._take_dropped(),
            )
            self._gap = False

    def _drop(self, counter: str, reason: str, header: TagsHeader) -> None:
        self._counts[counter] += 1
        if header.count:
            self._dropped[reason] += header.count

    def _take_dropped(self) -> dict[str, int]:
        dropped, self._dropped = dict(self._dropped), Counter()
        return dropped


def narrowed(inputs: NDArray[np.uint16]) -> NDArray[Any]:
    """Inputs in one byte each, where all of them fit."""
    if inputs.size and int(inputs.max()) > 255:
        return inputs
    return inputs.astype(np.uint8)
