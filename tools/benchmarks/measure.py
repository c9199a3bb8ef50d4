"""Medians of several runs, and tables."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable, Sequence
from typing import Any


def seconds(function: Callable[[], Any], runs: int = 5) -> float:
    """Median wall time of `runs` calls after one that is not counted."""
    function()
    found = []
    for _ in range(runs):
        began = time.perf_counter()
        function()
        found.append(time.perf_counter() - began)
    return statistics.median(found)


def side_by_side(functions: dict[str, Callable[[], Any]], runs: int = 5) -> dict[str, float]:
    """Median wall time of each, called in turn so that all see the same machine."""
    for function in functions.values():
        function()
    found: dict[str, list[float]] = {name: [] for name in functions}
    for _ in range(runs):
        for name, function in functions.items():
            began = time.perf_counter()
            function()
            found[name].append(time.perf_counter() - began)
    return {name: statistics.median(times) for name, times in found.items()}


def table(title: str, heads: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Print rows under heads; the first column to the left, the others to the right."""
    widths = [max(len(row[i]) for row in (heads, *rows)) for i in range(len(heads))]
    print(f"\n{title}")
    for row in (heads, *rows):
        first, *others = row
        cells = [f"{text:>{width}}" for text, width in zip(others, widths[1:], strict=True)]
        print("  ".join([f"{first:<{widths[0]}}", *cells]).rstrip(), flush=True)
