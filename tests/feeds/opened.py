"""Feeds from [feed] tables, and all that they deliver."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from tagstream.feeds import Arrivals, Feed, build_feed
from tagstream.settings.feeds import FEED_KINDS
from tagstream.units import PS_PER_S


def opened(table: dict[str, Any], path: Path | None = None, slice_ps: int = PS_PER_S) -> Feed:
    """The feed of a [feed] table."""
    table = table if path is None else table | {"path": str(path)}
    return build_feed(FEED_KINDS[table["kind"]].model_validate(table), slice_ps)


def tags_of(pieces: list[Arrivals]) -> list[tuple[int, int]]:
    """(time, input) of all tags."""
    return [tag for p in pieces for tag in zip(p.times_ps.tolist(), p.inputs.tolist(), strict=True)]
