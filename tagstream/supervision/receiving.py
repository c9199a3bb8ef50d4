"""What is done with the pieces of a feed before they are conditioned."""

from __future__ import annotations

from collections.abc import Callable, Generator, Mapping
from typing import Any

from tagstream.feeds import Arrivals, Feed
from tagstream.feeds.marking import MarkEntry, marked
from tagstream.feeds.shedding import Shedder, shed
from tagstream.load import Load, RecentLoad, limiting
from tagstream.recording.layout import Mark
from tagstream.settings import Settings

BLOCKED = 0.5  # of the time in which nothing could be received: we are behind
Numbers = Mapping[str, int | float | str]
Tap = Callable[[Generator[Arrivals]], Generator[Arrivals]]


def untapped(pieces: Generator[Arrivals]) -> Generator[Arrivals]:
    """Nothing is recorded."""
    return pieces


class LiveReceiving:
    """Shedding, marks and recording, in this order; what they and the feed count.

    live: tags come by themselves, so that more may come than can be processed.
    """

    def __init__(
        self, settings: Settings, feed: Feed, load: Load, live: bool, tap: Tap = untapped
    ) -> None:
        self._feed, self.load, self._live, self._tap = feed, load, live, tap
        self._recent = RecentLoad(load)
        self._mark_s = 0.0
        self._missing = self._burst_losses = 0
        self.marks = MarkEntry(settings.conditioning.max_jump_ps, self._placed)
        self._shedder: Shedder | None = None
        if live and settings.conditioning.overload == "shed":
            self._shedder = Shedder(
                settings.rolling.slice_ps, settings.conditioning, load.of_what_is_kept
            )

    def pieces(self) -> Generator[Arrivals]:
        """What conditioning takes."""
        pieces = self._feed.pieces()
        if self._shedder is not None:
            pieces = shed(pieces, self._shedder)
        pieces = self._tap(marked(pieces, self.marks))
        return self.load.timed_cpu("receiving", pieces) if self._live else pieces

    def numbers(self) -> dict[str, int | float | str]:
        """For the health; one reader alone."""
        fractions = self._recent.look()
        link: Mapping[str, Any] = getattr(self._feed, "link", {})
        shed_numbers = {} if self._shedder is None else self._shedder.numbers()
        return {
            **link,
            **{f"busy_{stage}": round(part, 3) for stage, part in fractions.items()},
            "busiest": limiting(fractions),
            **shed_numbers,
            "burst_losses": self._bursts(link, fractions, shed_numbers),
            "mark_latency_s": round(self._mark_s, 3),
        }

    def _bursts(self, link: Numbers, fractions: Numbers, shed_numbers: Numbers) -> int:
        """Messages that sender or network lost while we were behind: rates then read too low.

        What is left out by ourselves is no loss of this kind: it is chosen blindly.
        """
        missing = int(link.get("sequence_missing", 0)) + int(link.get("lost_tags", 0))
        more, self._missing = missing - self._missing, missing
        behind = shed_numbers.get("shed_fraction", 0) or float(fractions["blocked"]) > BLOCKED
        if more > 0 and behind:
            self._burst_losses += more
        return self._burst_losses

    def _placed(self, mark: Mark, waited_s: float) -> None:
        self._mark_s = waited_s
