"""A reply as text for people."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any


def lines(reply: Mapping[str, Any], indent: str = "") -> Iterator[str]:
    """A line for each value; what belongs together is indented below its name."""
    plain = {key: value for key, value in reply.items() if not isinstance(value, dict)}
    width = max(map(len, plain), default=0)
    for key, value in plain.items():
        yield f"{indent}{key:<{width}}  {'-' if value is None else value}"
    for key, value in reply.items():
        if isinstance(value, dict):
            yield f"{indent}{key}"
            yield from lines(value, f"{indent}  ")
