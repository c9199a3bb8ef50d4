"""The numbers of the health of a run that an alert may name."""

from __future__ import annotations

from collections.abc import Iterable

from tagstream.counters import DROP_REASONS

HEALTH_NUMBERS = (
    "received",
    "kept",
    *(f"dropped_{reason}" for reason in DROP_REASONS),
    "in_flight",
    "gaps",
    "gap_time_ps",
    "largest_disorder_ps",
    "backlog_blocks",
    "lag_behind_s",
    "last_tag_ps",
    "last_tag_age_s",
    "queued_s",
    "shed_fraction",
    "burst_losses",  # lost by sender or network while this program was behind
    "malformed",
    "sequence_missing",
    "peers_denied",
    "latency_s",
    "latency_p99_s",
    "mark_latency_s",
    "recording_hole_s",
    "recording_not_recorded",
    "history_rows_lost",
    "snapshots_skipped",
    "disk_free_bytes",
    "restarts",
    "degraded",  # 1 while results cannot be written
    "starved",  # 1 while no tags come
    "behind",  # 1 while tags come faster than they are processed
)


def health_names(channels: Iterable[str]) -> list[str]:
    """All of them, with how long each channel has been silent."""
    return [*HEALTH_NUMBERS, *(f"silent_{name}_s" for name in channels)]
