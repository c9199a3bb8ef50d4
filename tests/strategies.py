"""Generators of inputs, shared by the property tests; they shrink towards few tags and pieces."""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from typing import TypeVar

import numpy as np
from hypothesis import strategies as st
from numpy.typing import NDArray

from tagstream.feeds import Arrivals

T = TypeVar("T")


def sorted_times(most: int = 40, span_ps: int = 2_000) -> st.SearchStrategy[list[int]]:
    """A few sorted times in a range where many meet."""
    return st.lists(st.integers(0, span_ps), max_size=most).map(sorted)


def tags(
    inputs: int = 3, most: int = 60, span_ps: int = 2_000
) -> st.SearchStrategy[list[tuple[int, int]]]:
    """(time, input) in any order."""
    return st.lists(st.tuples(st.integers(0, span_ps), st.integers(0, inputs - 1)), max_size=most)


def cuts(most: int = 6) -> st.SearchStrategy[list[float]]:
    """Where to split a sequence, as fractions of its length."""
    return st.lists(st.floats(0, 1), max_size=most).map(sorted)


def split(items: list[T], fractions: list[float]) -> Iterator[list[T]]:
    """`items` in pieces, some of them empty."""
    bounds = [0, *(int(f * len(items)) for f in fractions), len(items)]
    for begin, end in itertools.pairwise(bounds):
        yield items[begin:end]


def arrivals(tags: list[tuple[int, int]], **fields: object) -> Arrivals:
    """A piece of a feed from (time, input)."""
    return Arrivals(int64([t for t, _ in tags]), np.array([i for _, i in tags], np.uint8), **fields)  # type: ignore[arg-type]


def int64(values: list[int]) -> NDArray[np.int64]:
    """An int64 array, also of nothing."""
    return np.array(values, np.int64)
