"""Plays recordings to an address, as a sender of tags would: for rehearsals and first tries.

A recording is cut into `Portion`s, of which each has all tags of its interval; a line carries
them: ZeroMQ messages, or described records over TCP or standard output.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Portion:
    """All tags of the half-open interval [begin_ps, end_ps), in arrival order.

    begin_ps, end_ps: stream time; intervals of a recording rise and never overlap. times_ps:
    int64, n. inputs: uint8 or uint16, n. Tags that the recording itself has outside of their
    interval are here too, still outside. gap_before: tags may have been lost just before, though
    the interval may begin where the last one ended. lossy: tags of this interval were lost.
    """

    begin_ps: int
    end_ps: int
    times_ps: NDArray[np.int64]
    inputs: NDArray[Any]
    gap_before: bool = False
    lossy: bool = False


class Line(Protocol):
    """Where portions go. One is opened for each session: a play of the whole recording.

    `send` and `heartbeat` return False when they gave up because a stop was asked for. `close`
    waits, for a while, until what was sent has left. counts: what was done, by name.
    """

    def send(self, portion: Portion) -> bool: ...

    def heartbeat(self, at_ps: int) -> bool: ...

    def close(self) -> None: ...

    @property
    def counts(self) -> Mapping[str, int]: ...
