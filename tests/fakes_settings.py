"""Small settings for tests of single stages."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from tagstream.settings import Settings

NAMES = ("clock", "arm_a", "arm_b")


def make_settings(
    delays: Sequence[int] = (0, 0, 0),
    dead_times: Sequence[int] = (0, 0, 0),
    max_disorder: str = "1 us",
    **more: Any,
) -> Settings:
    """Three channels on inputs 0, 1, 2. delays, dead_times: ps. more: further tables."""
    table: dict[str, Any] = {
        "feed": {"kind": "recording", "path": "events.h5"},
        "channels": {
            name: {"input": i, "delay": f"{delays[i]} ps", "dead_time": f"{dead_times[i]} ps"}
            for i, name in enumerate(NAMES)
        },
        "conditioning": {"max_disorder": max_disorder},
        "results": {"folder": "runs", "name": "test"},
    }
    return Settings.model_validate(table | more)
