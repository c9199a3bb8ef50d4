"""Counters that only grow: what arrived, what was kept, what was dropped and why.

At every moment ``received == kept + sum(dropped.values())`` for the tags whose fate is
decided; tags that still wait to be put in order are `in_flight`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

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

    def plus(self, other: Counters) -> Counters:
        """Both added up; the largest disorder is the larger one."""
        return Counters(
            self.arrived + other.arrived,
            self.in_flight + other.in_flight,
            self.kept + other.kept,
            self.gaps + other.gaps,
            self.gap_time_ps + other.gap_time_ps,
            max(self.largest_disorder_ps, other.largest_disorder_ps),
            {r: count + other.dropped.get(r, 0) for r, count in self.dropped.items()},
        )

    def negative(self) -> Counters:
        """What takes these away when it is added."""
        dropped = {reason: -count for reason, count in self.dropped.items()}
        return Counters(
            -self.arrived, -self.in_flight, -self.kept, -self.gaps, -self.gap_time_ps, 0, dropped
        )

    def drop(self, reason: str, count: int) -> None:
        """Count `count` tags as dropped for `reason` (one of DROP_REASONS)."""
        self.dropped[reason] += count


def counters_of(told: Mapping[str, Any]) -> Counters:
    """Counters as `dataclasses.asdict` told them; nothing is in flight any more.

    Tags that waited to be put in order when the process ended are lost: dropped, in a gap.
    """
    known = {name: value for name, value in told.items() if name in Counters.__slots__}
    found = Counters(**{**known, "dropped": dict.fromkeys(DROP_REASONS, 0) | told["dropped"]})
    found.drop("in_gap", found.in_flight)
    found.in_flight = 0
    return found
