"""Described records on standard input; its end is the end of the feed."""

from __future__ import annotations

import os
from collections.abc import Callable, Generator
from time import monotonic
from typing import Any

from tagstream.errors import SettingsError
from tagstream.feeds import Arrivals, ResumePoint
from tagstream.feeds.live_records import LiveRecordsFeed, Surroundings
from tagstream.feeds.readiness import ready
from tagstream.settings.feeds import StdinFeed as StdinSettings

STANDARD_INPUT = 0


class StdinFeed(LiveRecordsFeed):
    """A pipe or a file as standard input. Raises SettingsError for a terminal.

    It is never made non-blocking: other programs may share it.
    """

    def __init__(
        self,
        settings: StdinSettings,
        slice_ps: int,
        security: Any = None,
        resumed: ResumePoint | None = None,
        clock: Callable[[], float] = monotonic,
    ) -> None:
        super().__init__(settings, Surroundings(slice_ps, resumed, clock))
        if os.isatty(STANDARD_INPUT):
            raise SettingsError(
                [
                    '[feed] kind = "stdin": standard input is a terminal; right would be a pipe'
                    " or a file, as in `program | tagstream run my.toml`"
                ]
            )

    def pieces(self) -> Generator[Arrivals]:
        """As `Feed.pieces`."""
        records = self._records
        while True:
            if ready([STANDARD_INPUT], self._patience_s):
                count = os.readv(STANDARD_INPUT, [records.room])
                if count == 0:
                    break
                self._received(count)
                if records.due_s > 0:
                    continue
            yield from records.due_pieces()
        yield from self._session_ended()
