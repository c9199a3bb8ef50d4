"""Counters that only grow: what arrived, what was kept, what was dropped and why.

At every moment ``received == kept + sum(dropped.values())`` for the tags whose fate is
decided; tags that still wait to be put in order are `in_flight`.
"""

from __future__ import annotations

from dataclasses import dataclass, field

DROP_REASONS = (
    "late",
    "jump",
    "overflow",
    "outside_interval",
    "unlisted_input",
    "in_gap",
    "dead_time",
    "repeated",  # of a message that came before, or out of turn
    "foreign_stream",
    "overlap",  # of a message whose interval was covered before
    "shed",  # of a slice that was left out because more comes than can be processed
)


@dataclass(slots=True)
class Counters:
    """Event counts of one run. Written by the one thread that conditions tags."""

    arrived: int = 0
    in_flight: int = 0
    kept: int = 0
    gaps: int = 0
    gap_time_ps: int = 0
    largest_disorder_ps: int = 0
    dropped: dict[str, int] = field(default_factory=lambda: dict.fromkeys(DROP_REASONS, 0))

    @property
    def received(self) -> int:
        """Tags whose fate is decided: kept or dropped."""
        return self.arrived - self.in_flight

    def drop(self, reason: str, count: int) -> None:
        """Count `count` tags as dropped for `reason` (one of DROP_REASONS)."""
        self.dropped[reason] += count
