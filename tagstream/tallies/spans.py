"""Sums of slices: the last 10 s, the last minute, the whole run."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.settings import Rolling
from tagstream.tallies import Sums, added
from tagstream.units import format_time


@dataclass(frozen=True, slots=True)
class SpanSums:
    """What one span holds: [begin_ps, end_ps) and, by name of tally, its sums."""

    name: str
    begin_ps: int
    end_ps: int
    sums: Mapping[str, Sums]


class Spans:
    """Adds slices, in stream order, to all spans at once. Slices may be missing (gaps)."""

    def __init__(self, rolling: Rolling) -> None:
        self._slice_ps = rolling.slice_ps
        self._windows = [
            (format_time(span), _Window(*rolling.parts(span))) for span in rolling.spans_ps
        ]
        self._run: dict[str, dict[str, NDArray[Any]]] = {}
        self._first_slice: int | None = None
        self._last_slice = 0

    def add(self, slice_index: int, sums: Mapping[str, Sums]) -> None:
        """Add the sums of one slice, by name of tally."""
        if self._first_slice is None:
            self._first_slice = slice_index
        self._last_slice = slice_index
        for name, more in sums.items():
            self._run[name] = added(self._run.get(name), more)
        for _, window in self._windows:
            window.add(slice_index, sums)

    @property
    def slices(self) -> tuple[int, int] | None:
        """The first slice of the run, and the one after the last; None before any has ended."""
        return None if self._first_slice is None else (self._first_slice, self._last_slice + 1)

    def restore(self, slices: tuple[int, int], run: Mapping[str, Sums]) -> None:
        """Go on with the sums of a run that an earlier process had added up; spans are empty.

        slices: as told by `slices`. run: sums by name of tally.
        """
        self._first_slice, self._last_slice = slices[0], slices[1] - 1
        self._run = {name: added(None, sums) for name, sums in run.items()}
        for _, window in self._windows:
            window.begin_empty(run, slices[1])

    def restart(self) -> None:
        """Empty all spans but that of the run."""
        for _, window in self._windows:
            window.restart(self._last_slice + 1)

    def __iter__(self) -> Iterator[SpanSums]:
        """The run, then the spans in the order of the settings."""
        first = self._first_slice or 0
        end_ps = (self._last_slice + 1) * self._slice_ps
        yield SpanSums("run", first * self._slice_ps, end_ps, self._run)
        for name, window in self._windows:
            begin = max(first, window.first_slice(self._last_slice))
            yield SpanSums(name, begin * self._slice_ps, end_ps, window.totals())


class _Window:
    """The newest `count` parts, each of `each` slices on a fixed grid.

    Integers are kept as running totals, adding the new and subtracting the old, which is exact;
    the floating-point expected pairs are added anew from the parts, so that no error creeps in.
    """

    def __init__(self, count: int, each: int) -> None:
        self._count, self._each = count, each
        self._parts: deque[tuple[int, dict[str, dict[str, NDArray[Any]]]]] = deque()
        self._totals: dict[str, dict[str, NDArray[Any]]] = {}
        self._since = 0  # the slice with which it began anew
        self._nothing: dict[str, dict[str, NDArray[Any]]] = {}  # floats of an empty window

    def first_slice(self, last_slice: int) -> int:
        return max(self._since, (last_slice // self._each - self._count + 1) * self._each)

    def add(self, slice_index: int, sums: Mapping[str, Sums]) -> None:
        part = slice_index // self._each
        while self._parts and self._parts[0][0] <= part - self._count:
            self._subtract(self._parts.popleft()[1])
        same_part = bool(self._parts) and self._parts[-1][0] == part
        before = self._parts.pop()[1] if same_part else {}
        wide = {name: _wide(sums) for name, sums in before.items()}
        merged = {name: added(wide.get(name), more) for name, more in sums.items()}
        self._parts.append((part, {name: _narrow(more) for name, more in merged.items()}))
        for name, more in sums.items():
            self._totals[name] = added(self._totals.get(name), _integers(more))

    def begin_empty(self, like: Mapping[str, Sums], next_slice: int) -> None:
        """Hold nothing, in arrays like those given."""
        self._since = next_slice
        self._totals = {name: _zeros(_integers(sums)) for name, sums in like.items()}
        floats = {n: {k: v for k, v in s.items() if v.dtype.kind == "f"} for n, s in like.items()}
        self._nothing = {name: _zeros(sums) for name, sums in floats.items()}

    def restart(self, next_slice: int) -> None:
        self._since = next_slice
        self._nothing = {name: _zeros(self._floats(name)) for name in self._totals}
        self._parts.clear()
        self._totals = {name: _zeros(sums) for name, sums in self._totals.items()}

    def totals(self) -> dict[str, Sums]:
        return {
            name: {**total, **self._nothing.get(name, {}), **self._floats(name)}
            for name, total in self._totals.items()
        }

    def _subtract(self, part: Mapping[str, Sums]) -> None:
        for name, old in part.items():
            total = self._totals[name]
            for key, value in _integers(old).items():
                total[key] = np.asarray(total[key] - value.astype(np.int64))

    def _floats(self, name: str) -> dict[str, NDArray[Any]]:
        found: dict[str, NDArray[Any]] = {}
        for _, part in self._parts:
            for key, value in part[name].items():
                if value.dtype.kind == "f":
                    found[key] = np.asarray(found[key] + value) if key in found else value
        return found


def _zeros(sums: Sums) -> dict[str, NDArray[Any]]:
    return {key: np.zeros_like(value) for key, value in sums.items()}


def _integers(sums: Sums) -> dict[str, NDArray[Any]]:
    return {key: value for key, value in sums.items() if value.dtype.kind != "f"}


def _narrow(sums: Sums) -> dict[str, NDArray[Any]]:
    """Arrays of integers in the narrowest unsigned type of at most 32 bits that holds them.

    Never 64 bits: an unsigned and a signed integer of 64 bits add up to floating point.
    """
    return {
        key: value.astype(np.min_scalar_type(value.max()))
        if value.ndim and value.dtype.kind != "f" and value.max() < 2**32
        else value
        for key, value in sums.items()
    }


def _wide(sums: Sums) -> dict[str, NDArray[Any]]:
    """The same as int64, to be added to."""
    return {
        key: value if value.dtype.kind == "f" else value.astype(np.int64)
        for key, value in sums.items()
    }
